"""The book: job.toml and its tables, read strictly into a Job; every fault is collected and reported at once."""
