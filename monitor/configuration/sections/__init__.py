"""The configuration as pydantic models: every key that is built, what it may hold, its default.

Knows the contract's keys and what must be true within one characteristic. Must not know files,
lines or the engine: ``config`` reads files into these models, ``resolve`` makes a plan of them.
"""
