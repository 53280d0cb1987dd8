"""The chain in one file: recipe, run, folder of answers, and the trace of every number."""
