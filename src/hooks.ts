import type { Reroute } from '@sveltejs/kit';

const idsInPath = /(?<=\/)[0-9a-f]{8}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{12}(?=\/|$)/gi;

/** An id in an address means the same in capitals: every route is given the one spelling the database has. */
export const reroute: Reroute = ({ url }) => url.pathname.replace(idsInPath, (id) => id.toLowerCase());
