export { addShifted } from './add-shifted'
export { fromU8, fromU16, sumU16 } from './convert'
