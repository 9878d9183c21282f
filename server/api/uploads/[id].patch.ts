export default defineTusRoute('PATCH /api/uploads/:id')
