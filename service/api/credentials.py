"""The bearer token of a request (RFC 6750, section 2.1): in the Authorization header and nowhere else."""

from __future__ import annotations

from flask import Request

from service.records.errors import NotAuthenticated


def bearer_token(request: Request) -> str:
    """Return the token that came with the request. Raises NotAuthenticated where there is none."""
    scheme, _, token = request.headers.get("Authorization", "").partition(" ")
    if scheme.lower() != "bearer" or not token.strip():
        raise NotAuthenticated("the request has no bearer token in its Authorization header")
    return token.strip()
