export default defineTusRoute('OPTIONS /api/uploads/:id')
