"""Whatever waits, listens, writes or sends: site file, broker, worker, store, notifications."""
