export { addShifted } from './add-shifted'
export { fromU8, fromU16, sumU8, sumU16 } from './convert'
