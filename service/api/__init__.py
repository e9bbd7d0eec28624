"""JSON over HTTP: a blueprint a resource, handlers that read, make one call into the records, and answer.

Lives here: what HTTP adds to the records: credentials in headers, bodies and queries, preconditions,
idempotency keys, cursors, problems, and the API's own description. Refusals come in the order 401, 400, 404,
403, 422, 412, 409; `errors.py` alone turns a failure into a status.

May import: flask, the context, monitoring, sheets, records, documents and what lies left of them.

Must never know: the pages, cookies, SQL, the environment; which step a state allows and what a gain means. A
comparison of states or a computation in a handler is a fault.
"""
