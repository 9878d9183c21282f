import { createTransport, type Transporter } from 'nodemailer'
import type { MailText } from './mailTexts'

export interface NewMail extends MailText {
  to: { name: string, address: string }
}

let transport: Transporter | undefined

/** Where mails go: the SMTP server of the configuration, or the sink that the mail plugin has started. */
export function setMailServer(url: string | null): void {
  transport?.close()
  transport = url === null ? undefined : createTransport(url, { from: senderOf() })
}

export async function sendMail(mail: NewMail): Promise<void> {
  if (!transport) throw new Error('There is no mail server: neither LAMPSUM_SMTP_URL is set nor does the local one run.')
  await transport.sendMail(mail)
}

const senderOf = () => ({ name: 'Lampsum', address: `lampsum@${new URL(useRuntimeConfig().publicUrl).hostname.replace(/^[\d.]+$|^\[.*\]$/, 'localhost')}` })
