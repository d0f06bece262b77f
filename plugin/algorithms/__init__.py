"""Processing algorithms: each declares, reads, calls the core once, and writes."""
