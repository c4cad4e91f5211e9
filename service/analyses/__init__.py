"""Analyses: one module each, from a checked request and its set to a report."""
