import { z } from 'zod'
import { idSchema } from './common'

/** Upload-Metadata of a tus creation. The file name is only shown, never used as a path. */
export const uploadMetadataSchema = z.object({
  filename: z.string({ error: 'Give the file’s name as “filename” in Upload-Metadata.' })
    // eslint-disable-next-line no-control-regex
    .transform(name => name.replaceAll(/[\u0000-\u001f\u007f]/g, '').trim().slice(0, 255))
    .pipe(z.string().min(1, 'Give the file’s name as “filename” in Upload-Metadata.')),
  filetype: z.string().nullish().transform(type => type?.trim().slice(0, 120) || null),
  acquisitionId: z.string({ error: 'Give the id of a registered acquisition as “acquisitionId” in Upload-Metadata.' }).pipe(idSchema),
  kind: z.enum(['clip', 'record'], { error: 'Give “kind” in Upload-Metadata as clip or record.' }),
  part: z.coerce.number({ error: 'Give “part” in Upload-Metadata as a number, or leave it out.' }).int().min(1, 'Parts count from 1.')
    .max(1, 'Clips in several parts cannot be joined yet. Upload one file, as part 1.').nullish().transform(part => part ?? 1),
})
export type UploadMetadata = z.output<typeof uploadMetadataSchema>

/** Bytes of an upload, from Upload-Length. */
export const uploadLengthSchema = z.number({ error: 'Give the file’s size in Upload-Length. An upload of unknown size is not accepted.' })
  .int().min(1, 'The file is empty. Check that the camera or the DAQ has finished writing it, then upload it again.').max(2 ** 46, 'The file is larger than 64 TiB.')
