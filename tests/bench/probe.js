/**
 * Loaded into a process before its program (--import): answers how much memory it holds after collecting garbage, and
 * ends it when whoever measures is gone.
 */
process.on('message', async (question) => {
	if (question !== 'memory') return;
	// The first collection leaves what finalizers and weak references free only afterwards.
	for (let i = 0; i < 3; i += 1) {
		globalThis.gc?.();
		await new Promise((resolve) => setTimeout(resolve, 50));
	}
	const { heapUsed, external, rss } = process.memoryUsage();
	process.send?.({ heapBytes: heapUsed + external, rssBytes: rss });
});
process.on('disconnect', () => process.exit(1));
// The program ends when it is done, whether or not somebody may still ask.
process.channel?.unref();
