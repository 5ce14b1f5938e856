/** Requests and answers of accounts and the club. Each route names its schema; see DEVELOPERS.md, "Routes". */
import { z } from 'zod'

export const roles = ['organiser', 'mentor', 'member'] as const
export const roleSchema = z.enum(roles)
export type Role = typeof roles[number]

export const emailSchema = z.email().max(254).transform(text => text.trim().toLowerCase())
export const passwordSchema = z.string().min(12, 'Use at least 12 characters.').max(200)
export const personNameSchema = z.string().trim().min(1).max(100)
/** Opaque tokens and ids in URLs. */
export const idSchema = z.string().regex(/^[A-Za-z0-9_-]{16,64}$/)

export const signInBody = z.object({ email: z.string().min(1).max(254), password: z.string().min(1).max(200) })
export const registerBody = z.object({ token: idSchema, name: personNameSchema, password: passwordSchema })
export const forgotBody = z.object({ email: z.string().min(1).max(254) })
export const resetBody = z.object({ token: idSchema, password: passwordSchema })
export const profileBody = z.object({ name: personNameSchema })
export const changePasswordBody = z.object({ current: z.string().min(1).max(200), next: passwordSchema })
export const invitationBody = z.object({ email: emailSchema, role: roleSchema })
export const memberBody = z.object({ role: roleSchema.optional(), active: z.boolean().optional() })
export const clubBody = z.object({ name: z.string().trim().min(1).max(120).optional(), quotaBytes: z.number().int().min(0).max(2 ** 50).optional() })

/** GET /api/me, POST /api/auth/sign-in, /api/auth/register. */
export interface Me { id: string, name: string, email: string, role: Role, clubId: string, clubName: string }
/** GET /api/auth/invitation?token= */
export interface InvitationPreview { clubName: string, email: string, role: Role, expiresAt: string }
export interface Member { id: string, name: string, email: string, role: Role, active: boolean, joinedAt: string, lastSeenAt: string | null, runs: number, storedBytes: number }
export interface Invitation { id: string, email: string, role: Role, createdAt: string, expiresAt: string, usedAt: string | null }
/** GET /api/club. Members see names and roles; only organisers get e-mail addresses (empty otherwise). */
export interface Club { id: string, name: string, quotaBytes: number, storedBytes: number, members: Member[] }
/** GET /api/club/mails and /api/club/mails/:id (organiser). `text` only in the single answer. */
export interface MailItem { id: string, to: string, subject: string, sentAt: string, state: 'queued' | 'sent' | 'failed', error: string | null, text?: string }
/** GET /api/club/audit?page= (organiser). */
export interface AuditItem { id: string, at: string, actor: string, action: string, subject: string, detail: string }
export interface Page<T> { items: T[], total: number, page: number, pageSize: number }

/** Every error answer: statusCode, and a message for the user. `field` names what to correct, where one thing is wrong. */
export interface ApiError { statusCode: number, message: string, data?: { code: string, field?: string, retryAfterSeconds?: number } }
