export { uploadHandler as default } from '../../utils/tus/handler'
