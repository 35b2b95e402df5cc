// Loaded into every child before its own code: when the starting script is gone, even killed, the child stops
// in its orderly way instead of living on and holding its port.
if (process.channel) {
	process.on('disconnect', () => process.kill(process.pid, 'SIGTERM'));
	process.channel.unref();
}
