"""What leaves the service as a document of its own: the sheet for the panel, the checkpoint of the history.

Lives here: reading what such a document needs out of the records, having it made, and keeping what was made
at a decision. Api and pages both issue through these functions, so that both give out the same bytes.

May import: sheets, records and what lies left of them; cryptography in `checkpoints`, `signing_keys` and
`base64_text`.

Must never know: HTTP, the API, the pages, settings, SQL; how a sheet is laid out and what may be decided.
"""
