"""Every way the library below fails, turned into the project's own errors at one place.

Failures come as the library's own error, but also as plain `OSError`, `RuntimeError`,
`ValueError` and bare `Exception`: the kind is told from the code where there is one.
"""

from __future__ import annotations

import errno

from drivers.contract import (
    SourceBusy,
    SourceError,
    SourceLost,
    SourceNotFound,
    SourceRefused,
    SourceTimeout,
    clean,
)

_BUSY = {errno.EBUSY}
_TIMED_OUT = {errno.ETIMEDOUT}
_NOT_ALLOWED = {errno.EACCES, errno.EPERM}
_ABSENT = {errno.ENOENT, errno.ECONNREFUSED, errno.EHOSTUNREACH, errno.ENETUNREACH}

_KINDS_BY_STATUS: dict[str, type[SourceError]] = {
    "error_timeout": SourceTimeout,
    "error_resource_not_found": SourceNotFound,
    "error_invalid_resource_name": SourceNotFound,
    "error_resource_busy": SourceBusy,
    "error_resource_locked": SourceBusy,
    "error_library_not_found": SourceRefused,
    "error_nonsupported_operation": SourceRefused,
}

_PERMISSION = (
    "Give your account permission to use the device (on Linux often a group or a udev rule), "
    "then plug it in again."
)
_MISSING = "Check the resource's address and that the instrument's remote control is switched on."


def translate(error: BaseException, what: str, *, opening: bool = False) -> SourceError:
    """Turn a failure of the link into a leaf of `SourceError`.

    Parameters
    ----------
    error
        What was raised below.
    what
        What was being done, for the message: `reading from TCPIP::...`.
    opening
        True while a link is made for the first time: a thing that is not there is then *not
        found*, where later it is *lost*.
    """
    if isinstance(error, SourceError):
        return error
    kind = _kind(error)
    if kind is SourceLost and opening:
        kind = SourceNotFound
    elif kind is SourceNotFound and not opening:
        kind = SourceLost
    said = "no answer in time" if kind is SourceTimeout else clean(_words(error))
    message = f"{what}: {said}"
    if kind is SourceNotFound:
        return kind(message, _MISSING)
    if kind is SourceRefused and getattr(error, "errno", None) in _NOT_ALLOWED:
        return kind(message, _PERMISSION)
    return kind(message)


def _kind(error: BaseException) -> type[SourceError]:
    status = getattr(error, "error_code", None)
    if status is not None:
        return _KINDS_BY_STATUS.get(getattr(status, "name", ""), SourceLost)
    if isinstance(error, TimeoutError):
        return SourceTimeout
    number = getattr(error, "errno", None)
    if number in _BUSY:
        return SourceBusy
    if number in _TIMED_OUT:
        return SourceTimeout
    if number in _NOT_ALLOWED:
        return SourceRefused
    if number in _ABSENT:
        return SourceNotFound
    if "permission denied" in str(error).lower():
        return SourceRefused
    return SourceLost


def _words(error: BaseException) -> str:
    first = str(error).strip().splitlines()
    return first[0] if first else type(error).__name__
