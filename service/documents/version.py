"""The version of this service, which stands in every result; a test holds it to pyproject.toml."""

SERVICE_VERSION = "0.1.0"
