export default defineRoute('GET /api/home', ({ user }) => readHome(useDatabase(), user, () => useFileStore().freeBytes()))
