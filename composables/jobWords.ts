import type { Job } from '#shared/schemas/results'
import type { JobAction } from '#shared/states'

/** What an action does, in the words of its button. */
export const jobActionWords: Record<JobAction, { button: string, title: string, sentence: string }> = {
  cancel: { button: 'Cancel…', title: 'Cancel this job', sentence: 'The work of this attempt is thrown away; files already stored stay. You can try it again later.' },
  retry: { button: 'Try again', title: 'Try again', sentence: '' },
  hold: { button: 'Put on hold', title: 'Put on hold', sentence: '' },
  resume: { button: 'Take off hold', title: 'Take off hold', sentence: '' },
}

/** Why a job is where it is: its own message, or its place in the line. */
export function jobReason(job: Job, waitingInOrder: Job[], paused: boolean): string {
  if (job.state === 'waiting') {
    const place = waitingInOrder.findIndex(other => other.id === job.id) + 1
    const line = place ? placeInLine(place) : 'In line'
    return `${paused ? 'The queue is paused. ' : ''}${line}${job.attempts ? `, tried ${job.attempts} times so far` : ''}${job.message ? `: ${job.message}` : ''}`
  }
  return job.message ?? (job.state === 'running' && job.runnerName ? `On ${job.runnerName}` : '')
}

/** When the last waiting job will have run, if each takes what is known; null when nothing is known. */
export function queueDoneSeconds(jobs: Job[]): number | null {
  const known = jobs.filter(job => ['running', 'waiting'].includes(job.state) && job.etaSeconds !== null)
  return known.length ? Math.max(...known.map(job => job.etaSeconds!)) : null
}

export function matchesJob(job: Job, text: string): boolean {
  const words = text.toLowerCase().split(/\s+/).filter(Boolean)
  const hay = `${job.stage} ${job.acquisitionNumber} ${job.acquisitionTitle} ${job.campaignName} ${job.state} ${job.runnerName ?? ''} ${job.message ?? ''}`.toLowerCase()
  return words.every(word => hay.includes(word))
}
