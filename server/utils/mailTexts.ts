export interface MailText {
  subject: string
  text: string
}

const letter = (...paragraphs: string[]) => `${paragraphs.join('\n\n')}\n`

export const invitationMail = (name: string, link: string): MailText => ({
  subject: 'You are invited to Lampsum',
  text: letter(
    `Hello ${name},`,
    'an account on Lampsum has been made for you. Choose a password to start; this link works once, for 7 days:',
    link,
    'If it has run out, ask your admin to send the invitation again.',
  ),
})

export const resetMail = (name: string, link: string): MailText => ({
  subject: 'A new password for Lampsum',
  text: letter(
    `Hello ${name},`,
    'somebody asked for a new password for your account. This link works once, for one hour:',
    link,
    'If it was not you, you need do nothing: your password stays as it is.',
  ),
})
