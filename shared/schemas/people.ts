import { z } from 'zod'
import { roles } from '../permissions'
import { idSchema, nameSchema, timeSchema } from './common'

export const roleSchema = z.enum(roles)
export const emailSchema = z.string().trim().toLowerCase().max(254).pipe(z.email('Give an e-mail address like name@lab.example.'))
/** Length is what counts (OWASP ASVS 5.0, 6.2.1); no rules about kinds of characters. */
export const passwordSchema = z.string().min(12, 'Use at least 12 characters.').max(200, 'Use at most 200 characters.')

export const signInSchema = z.object({ email: z.string().trim().toLowerCase().min(1, 'Give your e-mail.').max(254), password: z.string().min(1, 'Give your password.').max(1000) })
export const userSchema = z.object({ id: idSchema, email: z.string(), name: z.string(), role: roleSchema })
export type User = z.infer<typeof userSchema>

export const personSchema = userSchema.extend({ state: z.enum(['active', 'invited', 'disabled']), demo: z.boolean(), createdAt: timeSchema, lastSeenAt: timeSchema.nullable() })
export type Person = z.infer<typeof personSchema>
export const inviteSchema = z.object({ email: emailSchema, name: nameSchema(120, 'a name'), role: roleSchema })
export const personPatchSchema = z.object({ name: nameSchema(120, 'a name').optional(), role: roleSchema.optional(), disabled: z.boolean().optional() })

export const requestResetSchema = z.object({ email: z.string().trim().toLowerCase().min(1, 'Give your e-mail.').max(254) })
/** Sets the password of an invitation or a reset. */
export const acceptLinkSchema = z.object({ token: z.string().min(20).max(200), password: passwordSchema, name: nameSchema(120, 'a name').optional() })
export const linkInfoQuerySchema = z.object({ token: z.string().min(1).max(200) })
export const linkInfoSchema = z.object({ kind: z.enum(['invitation', 'reset']), email: z.string(), name: z.string() })

export const tokenCreateSchema = z.object({ name: nameSchema(120, 'a name, such as the computer it is for') })
export const tokenSchema = z.object({ id: idSchema, name: z.string(), createdAt: timeSchema, lastUsedAt: timeSchema.nullable() })
export type ApiToken = z.infer<typeof tokenSchema>
export const tokenCreatedSchema = z.object({ id: idSchema, token: z.string() })

/** Mails caught by the local mail sink (demo mode only). */
export const mailSchema = z.object({ id: idSchema, to: z.string(), subject: z.string(), text: z.string(), receivedAt: timeSchema })
export type Mail = z.infer<typeof mailSchema>
