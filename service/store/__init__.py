"""Coefficient sets that are kept: content-addressed, immutable, in SQLite or PostgreSQL.

What is kept of a set is what was sent: its document (cell, meaning of the columns, symmetry,
preparation) and its columns or files, bit for bit. Everything else is derived from these.
"""
