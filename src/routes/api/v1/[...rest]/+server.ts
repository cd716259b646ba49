import type { RequestHandler } from './$types';
import { notFound } from '$lib/server/problem';

/** Whatever lies below /api/v1 and is no address of it: any method, a problem like every other refusal. */
export const fallback: RequestHandler = () => notFound();
