/** When to show the cautions of solar observing: whenever a name suggests that the target is the Sun. */
export function suggestsSun(...names: (string | null | undefined)[]): boolean {
  return names.some(name => /(^|[^\p{L}])(sun|solar|sunspots?|prominences?|photosphere|chromosphere|sonne|soleil|sol)([^\p{L}]|$)/iu.test(name ?? ''))
}

/** The usual cautions, in the words of public-education leaflets; local rules and expert practice come first. */
export const sunCautions = [
  'Use only a purpose-made, undamaged filter that covers the full front aperture, fixed so that it cannot come off.',
  'Never put a filter at the eyepiece end: it sits in concentrated heat and can crack.',
  'Cap or remove finders. Never leave the telescope unattended, least of all near children.',
  'Never look through optics with eclipse glasses. ISO 12312-2 does not cover filters for telescopes.',
  'Follow local rules and the advice of experienced solar observers before anything that is written here.',
] as const
