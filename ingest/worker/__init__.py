"""The worker: receive, run the chain, commit, acknowledge; the one writer of a site's store."""
