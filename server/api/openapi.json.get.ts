import { version } from '../../package.json'

let description: ReturnType<typeof describeApi> | undefined

export default defineRoute('GET /api/openapi.json', async () => description ??= describeApi(version))
