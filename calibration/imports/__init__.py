"""Past tests and requirements out of files: what the columns mean, and what a row says."""
