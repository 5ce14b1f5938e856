/** Prints the demo's sign-ins; the start command shows them once the server is ready. */
import { demoPeople } from '../shared/demo'

for (const { role, email, password } of demoPeople) console.log(`  ${role.padEnd(10)} ${email.padEnd(24)} ${password}`)
