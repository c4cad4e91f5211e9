"""Fields to bytes, and which bytes a client wants."""
