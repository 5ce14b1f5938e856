/** The demo's invented club. Passwords stand here openly because the demo holds nothing of anybody. */
export const demoClub = 'Marram Point Observers'

export const demoPeople = [
  { email: 'orla@marram.example', name: 'Orla Quist', role: 'organiser', password: 'lamp-over-the-dunes' },
  { email: 'matthis@marram.example', name: 'Matthis Verhoel', role: 'mentor', password: 'steady-air-at-four' },
  { email: 'ines@marram.example', name: 'Ines Calder', role: 'member', password: 'seven-good-frames' },
  { email: 'jorin@marram.example', name: 'Jorin Ashby', role: 'member', password: 'wind-from-the-sea' },
] as const
