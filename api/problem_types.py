"""The kinds of problem that answers name (RFC 9457), as the documentation page lists them."""

from dataclasses import dataclass


@dataclass(frozen=True)
class ProblemType:
    """A kind of problem; `meaning` is what the documentation page says about it."""

    slug: str
    status: int
    title: str
    meaning: str

    @property
    def address(self) -> str:
        return f"/docs#problem-{self.slug}"


INVALID_DOCUMENT = ProblemType(
    "invalid-document", 422, "The job document is wrong",
    "`errors` lists every fault that was found, each with the JSON pointer of its place and what "
    "is allowed there. Correct them all and send the document again.",
)  # fmt: skip
UNMESHABLE = ProblemType(
    "unmeshable-plate", 422, "The plate cannot be meshed",
    "The geometry, or something named on it, cannot be brought onto a mesh; `errors` says where.",
)  # fmt: skip
UNSOLVABLE = ProblemType(
    "unsolvable-plate", 422, "The plate cannot be solved",
    "The equations have no reliable solution, mostly because a part is free to move.",
)  # fmt: skip
BAD_REQUEST = ProblemType(
    "bad-request", 400, "The request is wrong",
    "A query parameter or a header is not what this address allows; `errors` names each of them.",
)  # fmt: skip
BODY_TOO_LARGE = ProblemType(
    "body-too-large", 413, "The body is too large",
    "The body, after decompression, is larger than this server accepts.",
)  # fmt: skip
MEDIA_TYPE_UNKNOWN = ProblemType(
    "unsupported-media-type", 415, "The body has a type that is not understood here",
    "Send `Content-Type: application/json`, plain or with `Content-Encoding: gzip`.",
)  # fmt: skip
KEY_REUSED = ProblemType(
    "idempotency-key-reused", 422, "The Idempotency-Key belongs to another document",
    "One key stands for one document. Send the same bytes to repeat a request, or use a new key.",
)  # fmt: skip
JOB_TOO_LARGE = ProblemType(
    "job-too-large", 413, "The job is larger than this server takes",
    "`errors` says what there is too much of, and how much is allowed. Where that is memory, "
    "`estimate` says how many bytes each stage would take, and `limit` how many there are.",
)  # fmt: skip
TOKEN_NEEDED = ProblemType(
    "token-needed", 401, "A token is needed",
    "This server answers only to whoever sends a token that it knows: "
    "`Authorization: Bearer TOKEN` (RFC 6750). Whoever runs the server makes them.",
)  # fmt: skip
ROLE_NEEDED = ProblemType(
    "role-needed", 403, "The token is not for this",
    "The role of the token does not allow this; `WWW-Authenticate` names the role that does.",
)  # fmt: skip
TOO_MANY = ProblemType(
    "too-many-requests", 429, "Too many requests",
    "The requests of one token, or of one address without, are limited in number. Ask again after "
    "`Retry-After` seconds.",
)  # fmt: skip
LINE_FULL = ProblemType(
    "line-full", 429, "The workspace has too many unfinished jobs",
    "Nothing was accepted. Send the job again after `Retry-After` seconds, or when others are "
    "done.",
)  # fmt: skip
PINNED = ProblemType(
    "pinned", 409, "The job is pinned",
    "Somebody wants it kept. Whoever may remove it may unpin it first.",
)  # fmt: skip
UNKNOWN_JOB = ProblemType(
    "unknown-job", 404, "There is no such job",
    "No job of your workspace has this id: it was never accepted here, or it was removed.",
)  # fmt: skip
NOTHING_OF_THAT_NAME = ProblemType(
    "unknown-name", 404, "The job has nothing of that name",
    "The job has no case, combination, quantity or table of this name; `available` lists them.",
)  # fmt: skip
UNKNOWN_BATCH = ProblemType(
    "unknown-batch", 404, "There is no such batch",
    "No job has this label; labels are given in the job documents.",
)  # fmt: skip
NOTHING_JOINT = ProblemType(
    "nothing-joint", 409, "The batch has no joint envelope",
    "A joint envelope needs finished jobs on the same mesh, in the same units. The worst of jobs "
    "on different meshes is in the answer for the batch itself.",
)  # fmt: skip
NOT_FINAL = ProblemType(
    "not-finished", 409, "The job is not finished",
    "Results exist only when the job is finished. Ask for the job with `Prefer: wait=30`.",
)  # fmt: skip
JOB_FAILED = ProblemType(
    "job-failed", 409, "The job has no results because it failed",
    "The job ended without results; `errors` says why. Correct the document and submit it anew.",
)  # fmt: skip
JOB_CANCELLED = ProblemType(
    "job-cancelled", 409, "The job has no results because it was cancelled",
    "Submit the document again if its results are wanted after all.",
)  # fmt: skip
NOT_READY = ProblemType(
    "not-ready", 503, "The server is not ready",
    "`checks` says which part is missing: the queue, the store, or the workers.",
)  # fmt: skip
OVERTAKEN = ProblemType(
    "overtaken", 409, "The job went on in the meantime",
    "The job changed its state while the request was under way. Look at it and decide again.",
)  # fmt: skip
ARTEFACT_LATE = ProblemType(
    "not-made-yet", 503, "The file is not made yet",
    "A worker makes this file on request; it was not done within the waiting time. Ask again "
    "after `Retry-After` seconds.",
)  # fmt: skip
ARTEFACT_FAILED = ProblemType(
    "file-not-made", 500, "The file could not be made",
    "A worker tried to make this file and failed; `detail` gives the reason.",
)  # fmt: skip
PICTURES_UNAVAILABLE = ProblemType(
    "pictures-unavailable", 503, "This server cannot make pictures",
    "The machine of the workers cannot render off-screen; numbers and fields are not affected.",
)  # fmt: skip
UNKNOWN_CHECK = ProblemType(
    "unknown-check", 404, "There is no such check",
    "A check is kept for an hour after its document was last sent. Send it again.",
)  # fmt: skip
CHECK_LATE = ProblemType(
    "not-checked-yet", 503, "The check is not made yet",
    "All workers are busy, or the plate takes long to mesh. Send the same document again after "
    "`Retry-After` seconds: it is the same check and keeps its place in the line.",
)  # fmt: skip
CHECK_FAILED = ProblemType(
    "check-failed", 500, "The check could not be made",
    "A worker tried and failed; `detail` gives the reason.",
)  # fmt: skip
STORE_REFUSED = ProblemType(
    "store-refused", 503, "The job store refused",
    "The store could not write or read, for instance because the disk is full. Nothing was "
    "accepted.",
)  # fmt: skip
QUEUE_AWAY = ProblemType(
    "queue-away", 503, "The queue cannot be reached",
    "Redis does not answer. Accepted jobs are safe and are queued when it is back.",
)  # fmt: skip
UNEXPECTED = ProblemType(
    "unexpected", 500, "Something went wrong inside the server",
    "A fault of the server, not of the request. Its log has the details under `reference`.",
)  # fmt: skip

TYPES: tuple[ProblemType, ...] = tuple(
    value for value in list(globals().values()) if isinstance(value, ProblemType)
)
