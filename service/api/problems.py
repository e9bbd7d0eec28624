"""The catalogue of everything that this service refuses, one entry a type of problem (RFC 9457, section 4).

A type is named by the path of its page, `/problems/NAME`. Names never change their meaning: programs branch
on them. Which exception becomes which problem is said in `service.api.errors`.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class ProblemType:
    """One type of problem: what it means and what its reader can do about it."""

    name: str
    status: int
    title: str
    meaning: str
    remedy: str

    @property
    def path(self) -> str:
        """The problem's type as a URI reference, where its page stands too."""
        return f"/problems/{self.name}"


UNAUTHENTICATED = ProblemType(
    "unauthenticated",
    401,
    "A valid token is needed",
    "The request has no credential, or one that is unknown, revoked or not of this service.",
    "Send the header Authorization: Bearer TOKEN with a token that an administrator issued to you.",
)
NOT_JSON = ProblemType(
    "not-json",
    400,
    "The body is not JSON as this service reads it",
    "The body is empty, is not UTF-8 or not JSON, repeats a key, is nested too deeply, or holds a number "
    "that is not finite (NaN, Infinity, 1e999). Such a body is refused whole, since programs differ in "
    "what they make of it.",
    "Send one JSON object in UTF-8. The detail names the place.",
)
BAD_QUERY = ProblemType(
    "bad-query",
    400,
    "The query cannot be read",
    "A query parameter is unknown here, stands twice, has a value of the wrong kind, or is a cursor that "
    "this service did not make for this very list.",
    "Each pointer in errors names a query parameter. Follow the Link headers in place of making cursors.",
)
BAD_REQUEST = ProblemType(
    "bad-request",
    400,
    "The request cannot be read",
    "The request breaks the rules of HTTP or of a header: an Idempotency-Key of more than 200 characters, "
    "for one.",
    "The detail says which rule.",
)
NOT_FOUND = ProblemType(
    "not-found",
    404,
    "There is no such thing here",
    "Nothing stands at this address, or it lies outside the areas of your account. The two look alike on "
    "purpose.",
    "Check the address; ask an administrator which areas your account has.",
)
METHOD_NOT_ALLOWED = ProblemType(
    "method-not-allowed",
    405,
    "This address does not take that method",
    "The address exists, and the method of the request is not one of those that it takes.",
    "The Allow header lists the methods.",
)
NOT_ACCEPTABLE = ProblemType(
    "not-acceptable",
    406,
    "There is no such representation",
    "None of the media types in the Accept header is one that this address can answer with.",
    "Leave the Accept header out, or name one of the types in the API description.",
)
FORBIDDEN = ProblemType(
    "forbidden",
    403,
    "Your account may not do this",
    "You are known, and none of your roles allows this. For a decision: whoever submitted or prepared the "
    "gains neither approves nor rejects them, and one person does not sign twice.",
    "The detail says what is missing. Another person with the right role can do it.",
)
SIGNING_REFUSED = ProblemType(
    "signing-refused",
    403,
    "The signature was refused",
    "The password that signs was wrong or missing. A token alone never signs. The attempt is in the history.",
    "Sign again with your own password. After repeated failures the account is locked for a while.",
)
INVALID_FIELDS = ProblemType(
    "invalid-fields",
    422,
    "Fields of the body cannot be accepted",
    "The body is JSON, and at least one field is missing, unknown, of the wrong type, out of its bounds "
    "or at odds with another one. Nothing was stored.",
    "Each entry of errors has the JSON pointer (RFC 6901) of a field and what is wrong with it; all are "
    "listed.",
)
IDEMPOTENCY_KEY_REUSED = ProblemType(
    "idempotency-key-reused",
    422,
    "This Idempotency-Key came with another request before",
    "The same key was sent before with another body or to another address. A key stands for one request "
    "only.",
    "Send a fresh key for a new request; repeat a request with its own key and an unchanged body.",
)
PRECONDITION_FAILED = ProblemType(
    "precondition-failed",
    412,
    "What you saw has changed since",
    "The If-Match header, or the content_digest of a decision, names a state that is no longer the "
    "present one.",
    "Read the resource again, look at what changed, and decide anew.",
)
PRECONDITION_REQUIRED = ProblemType(
    "precondition-required",
    428,
    "Say which state you are changing",
    "Changing this resource needs an If-Match header, so that nobody overwrites a change they have not seen.",
    "Send the ETag of your last reading in If-Match.",
)
CONFLICT = ProblemType(
    "conflict",
    409,
    "The present state does not allow this",
    "The step is not one that the life cycle allows from the present state, what the submission was "
    "computed from has changed since, or somebody else was quicker. The detail says which.",
    "Read the resource again. Where the basis changed, send it again, so that it is recomputed.",
)
SECOND_PERSON_NEEDED = ProblemType(
    "second-person-needed",
    409,
    "One person alone does not change this",
    "Approvals of the loop rest on what would change: ranges, what the output acts on, a limit loosened, or "
    "the safety mark taken off. Such a change is proposed by one person and confirmed by another.",
    "Each entry of errors names a field and what would change. Send the same loop with a reason to "
    "POST /v1/loops/{id}/changes, and have a reviewer confirm it.",
)
TOO_LARGE = ProblemType(
    "too-large",
    413,
    "The body is too large",
    "The body has more bytes than this service reads.",
    "The detail states the limit. Nothing was read or stored.",
)
UNSUPPORTED_MEDIA_TYPE = ProblemType(
    "unsupported-media-type",
    415,
    "The body is of a type that is not read here",
    "A body is read as application/json in UTF-8, without a Content-Encoding: compressed bodies are refused.",
    "Send Content-Type: application/json and no Content-Encoding.",
)
TOO_MANY_REQUESTS = ProblemType(
    "too-many-requests",
    429,
    "Too many attempts",
    "There were too many failed attempts of this kind.",
    "Wait for the seconds that the Retry-After header states.",
)
INTERNAL_ERROR = ProblemType(
    "internal-error",
    500,
    "The service failed",
    "A fault in the service. The request was rolled back: nothing of it was stored.",
    "Give the request's identifier (instance) to whoever runs the service; the log has the reason.",
)
UNAVAILABLE = ProblemType(
    "unavailable",
    503,
    "The records cannot be reached at present",
    "The database is down, locked, full or read-only. The request was rolled back: nothing of it was stored.",
    "Try again after the seconds in Retry-After, with the same Idempotency-Key.",
)

CATALOGUE: tuple[ProblemType, ...] = (
    UNAUTHENTICATED,
    NOT_JSON,
    BAD_QUERY,
    BAD_REQUEST,
    NOT_FOUND,
    METHOD_NOT_ALLOWED,
    NOT_ACCEPTABLE,
    FORBIDDEN,
    SIGNING_REFUSED,
    INVALID_FIELDS,
    IDEMPOTENCY_KEY_REUSED,
    PRECONDITION_FAILED,
    PRECONDITION_REQUIRED,
    CONFLICT,
    SECOND_PERSON_NEEDED,
    TOO_LARGE,
    UNSUPPORTED_MEDIA_TYPE,
    TOO_MANY_REQUESTS,
    INTERNAL_ERROR,
    UNAVAILABLE,
)
BY_NAME: dict[str, ProblemType] = {problem.name: problem for problem in CATALOGUE}
