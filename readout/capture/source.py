"""The border to the world: everything that gives frames."""

from __future__ import annotations

from types import TracebackType
from typing import Protocol, Self

from readout.model import Frame


class Source(Protocol):
    """Opened by ``with``, read one frame at a time, closed by the thread that reads."""

    @property
    def live(self) -> bool:
        """True if frames come at their own time and a lost source may come back (a camera, a
        stream); False for a folder or video, which is read at the reader's pace and ends.
        """
        ...

    def __enter__(self) -> Self: ...

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None: ...

    def read(self, timeout_s: float) -> Frame:
        """The next frame, within ``timeout_s`` seconds.

        ``seq`` counts from 0 and leaves a gap for each frame known to be dropped.

        Raises
        ------
        SourceStalled
            Nothing came in time; reading again is allowed.
        SourceLost
            The source failed; only a new source can help.
        SourceEnded
            A folder or video has been read to its end.
        """
        ...
