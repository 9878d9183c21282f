/**
 * The upload server alone, as a process of its own that a test can kill: LAMPSUM_TEST_DATABASE_URL, LAMPSUM_TEST_FOLDER
 * and LAMPSUM_TEST_USER say on what it works. Prints its port.
 */
import { createServer } from 'node:http'
import type { AddressInfo } from 'node:net'
import { openDatabase } from '../../server/db/client'
import { TusServer } from '../../server/utils/tusServer'

const { LAMPSUM_TEST_DATABASE_URL: url, LAMPSUM_TEST_FOLDER: folder, LAMPSUM_TEST_USER: userId, LAMPSUM_TEST_PORT: port = '0' } = process.env
const { database } = openDatabase(url!, 4)
const user = { id: userId!, email: 'technician@lab.example', name: 'A technician', role: 'technician' as const }
const tus = new TusServer({ folder: folder!, database: () => database, freeBytes: async () => 1e12, userOf: () => user })
const server = createServer((request, response) => void tus.handle(request, response))
server.listen(Number(port), '127.0.0.1', () => console.log(`port ${(server.address() as AddressInfo).port}`))
