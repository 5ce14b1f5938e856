/** Prints the demo's sign-ins; the start command shows them once the server is ready. */
import { people } from './scenario'

for (const { role, email, password } of Object.values(people)) console.log(`  ${role.padEnd(10)}  ${email.padEnd(22)}  ${password}`)
