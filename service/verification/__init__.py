"""The verifier of a store: recomputes the history and everything that it vouches for.

Lives here: reading a store as it lies, and the checks. May import: sqlalchemy; in `signatures` alone
cryptography. Must never know: anything else of this service. It shares no code with what wrote the store, so
that one fault does not hide the other.
"""
