export default defineTusRoute('POST /api/uploads')
