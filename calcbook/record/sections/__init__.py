"""The sections of a record, in order; each is a function from a ``Page`` to blocks."""
