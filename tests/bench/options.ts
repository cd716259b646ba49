/** How a measurement is asked for. */
export interface Options {
	/** Fewer and shorter rounds. */
	quick: boolean;
	/** A folder for profiles of the server, or null. */
	profile: string | null;
	/** How many winders latency is measured with; empty: all that are known. */
	winders: number[];
}
