/** Where files lie. */
import path from 'node:path'

const dataDir = () => path.resolve(useRuntimeConfig().dataDir)
/** Files of filed runs, named by their SHA-256. */
export const storeFolder = () => path.join(dataDir(), 'store')
/** Uploads that are under way. */
export const uploadsFolder = () => path.join(dataDir(), 'uploads')
/** Files that did not match what was announced; kept aside for a while. */
export const refusedFolder = () => path.join(dataDir(), 'refused')
/** Mails that the demo's own SMTP server took. */
export const mailFolder = () => path.join(dataDir(), 'mail')
/** How the first organiser of an empty club comes in; for the operator. */
export const firstInvitationFile = () => path.join(dataDir(), 'first-invitation.txt')
