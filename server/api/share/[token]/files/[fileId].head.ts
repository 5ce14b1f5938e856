export { default } from './[fileId].get'
