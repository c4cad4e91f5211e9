"""The wall between client work and the server: everything a client sends is computed behind it.

A library that crashes on bad input, a computation that takes too long or too much memory, a parser
that holds the interpreter lock: each costs one worker process and one request, never the server.
"""
