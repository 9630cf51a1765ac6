"""One class for each thing a caller can do about a failure.

Every message is one line that says what is wrong and what to do; the commands print it as it is.
"""

from __future__ import annotations

import errno


class ReadoutError(Exception):
    """The work could not be done; the message is meant for the person at the keyboard."""


class BadInput(ReadoutError):
    """A file, folder or value given by the user cannot be used: give another one."""


class SourceStalled(ReadoutError):
    """No frame within the time allowed; the source may still recover: read again."""


class SourceLost(ReadoutError):
    """The source is gone or failed: close it and open it anew."""


class SourceEnded(ReadoutError):
    """A folder or video has no more frames: there is nothing more to read."""


class Busy(ReadoutError):
    """Something else holds what was asked for (a port, a camera): free it or choose another."""


class NotNow(ReadoutError):
    """What was asked for cannot be done at this moment: wait for what the message names."""


class NotRecorded(ReadoutError):
    """Readings could not be written to the log: nothing after this is kept until a new run."""


class NoRoom(ReadoutError):
    """The disk is full: make room, then do it again."""


def cannot_write(place: object, error: OSError) -> ReadoutError:
    """What to raise where ``error`` kept ``place``, a file or folder, from being written."""
    reason = error.strerror or error
    if error.errno in (errno.ENOSPC, errno.EDQUOT):
        return NoRoom(f"cannot write {place} ({reason}): make room on the disk")
    return BadInput(f"cannot write {place} ({reason}): choose another place")
