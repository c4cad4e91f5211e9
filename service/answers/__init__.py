"""Answers about stored sets: computed once, kept in memory, compressed where it pays."""
