"""Frozen dataclasses from JSON and to JSON.

Lives here: strict reading with a JSON pointer for every refusal, the limits on sizes, writing, canonical
bytes and digests, the request documents, schemas. May import: `analysis`, `judgement`, pydantic, rfc8785, and
numpy and scipy for their versions alone. Must never know: HTTP, SQL, the clock, files.
"""
