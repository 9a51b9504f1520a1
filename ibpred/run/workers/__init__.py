"""Who does the work: threads, processes, a cluster."""
