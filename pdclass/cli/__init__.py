"""The command line: parses, calls one function of a job, prints."""
