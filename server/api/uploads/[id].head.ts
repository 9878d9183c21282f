export default defineTusRoute('HEAD /api/uploads/:id')
