"""The one error hierarchy: what the client wrote wrong, and what the numbers refuse."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong in a request: a JSON Pointer (RFC 6901) and a sentence."""

    pointer: str
    detail: str


class ProblemError(Exception):
    """The request cannot be accepted (HTTP 400): every fault found, each with its place."""

    def __init__(self, *faults: Fault) -> None:
        super().__init__("; ".join(f"{fault.pointer}: {fault.detail}" for fault in faults))
        self.faults = faults


class ComputationError(Exception):
    """An accepted job cannot be finished; says why and what to change.

    Parameters
    ----------
    kind : last word of the problem type URI, for example ``"domain-not-connected"``.
    title : the type in a few words, the same for every occurrence.
    detail : this occurrence and the advice, in sentences for the user.
    status : HTTP status of the job's results (422 unless the service itself failed).
    """

    def __init__(self, kind: str, title: str, detail: str, status: int = 422) -> None:
        super().__init__(detail)
        self.kind = kind
        self.title = title
        self.detail = detail
        self.status = status
