export default defineTusRoute('OPTIONS /api/uploads')
