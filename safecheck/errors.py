"""Every error a user can meet, in one tree.

::

    SafecheckError                  one clear sentence: what, where, what was expected
    ├── UsageError                  the call is wrong                              exit 2
    │   ├── DocumentError           a key of a plan, region file or record is wrong; names its dotted path
    │   └── ResumeMismatch          a dossier was begun with another input, plan, key or version
    ├── InputRefused                one file or frame whose pixels would be measured on a doubtful path
    ├── InputExcluded               one file or frame that is no subject of an assessment
    ├── CodecError                  one frame and one codec
    │   ├── CodecUnavailable        this machine lacks the library
    │   ├── CannotEncode            the codec does not take this pixel format
    │   └── CorruptCode             the bytes are not what the encoder wrote
    ├── RegionError                 a region is malformed, or lies on no frame
    ├── DossierError                a dossier is damaged, incomplete or of another format
    ├── WorkerLost                  a worker process died under a task
    └── Interrupted                 stopped before the end; can be resumed         exit 5

Libraries' own exceptions are mapped onto these where the library is called, so that the command line needs one
translator only. No message may hold a patient identifier, a raw UID or a file path below the input the user named.
"""

from __future__ import annotations

__all__ = [
    "CannotEncode",
    "CodecError",
    "CodecUnavailable",
    "CorruptCode",
    "DocumentError",
    "DossierError",
    "InputExcluded",
    "InputRefused",
    "Interrupted",
    "RegionError",
    "ResumeMismatch",
    "SafecheckError",
    "UsageError",
    "WorkerLost",
]


class SafecheckError(Exception):
    """Base of all errors that reach a user as one sentence."""


class UsageError(SafecheckError):
    """The call, an argument or a combination of arguments is wrong."""


class DocumentError(UsageError):
    """A document (plan, region file, record) has a wrong, unknown or missing key.

    Parameters
    ----------
    path
        Dotted path of the key, e.g. ``limits[0].unit``.
    message
        What was found and what was expected.
    """

    def __init__(self, path: str, message: str) -> None:
        super().__init__(f"{path}: {message}" if path else message)
        self.path = path


class ResumeMismatch(UsageError):
    """The dossier was begun with another input, plan, key or version."""


class _WithReason(SafecheckError):
    """An input left out, with a reason code of :data:`safecheck.wording.REASONS`."""

    def __init__(self, reason: str, detail: str = "") -> None:
        super().__init__(f"{reason}: {detail}" if detail else reason)
        self.reason = reason
        self.detail = detail

    def __reduce__(self) -> tuple[type[_WithReason], tuple[str, str]]:
        # Exceptions cross process borders; the default would pass only the joined message.
        return type(self), (self.reason, self.detail)


class InputRefused(_WithReason):
    """Pixels that would be read on a doubtful path: no number is computed."""


class InputExcluded(_WithReason):
    """A file or frame that is by rule no subject of an assessment."""


class CodecError(SafecheckError):
    """A codec could not do what was asked for one frame."""


class CodecUnavailable(CodecError):
    """The library that carries a codec is not on this machine."""


class CannotEncode(CodecError):
    """The codec does not take this pixel format or frame size."""


class CorruptCode(CodecError):
    """The bytes are not a code that this codec wrote."""


class RegionError(SafecheckError):
    """A region is malformed, on another frame of reference, or on no frame."""


class DossierError(SafecheckError):
    """A dossier is damaged, incomplete or of another format."""


class WorkerLost(SafecheckError):
    """A worker process died while it held a task."""


class Interrupted(SafecheckError):
    """The run was stopped before its end and can be resumed."""
