export default defineTusRoute('DELETE /api/uploads/:id')
