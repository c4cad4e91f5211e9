"""Endpoints, one module a subject."""
