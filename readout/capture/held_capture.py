"""What the sources that read through OpenCV share: one open capture, let go once."""

from __future__ import annotations

from types import TracebackType

from readout.capture.opencv import cv2


class HeldCapture:
    """Holds the capture from opening to the end of the ``with`` block, or to its first failure."""

    _capture: cv2.VideoCapture | None = None

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self._let_go()

    def _let_go(self) -> None:
        """Release the capture, by the thread that reads it; a second time does nothing."""
        if self._capture is not None:
            self._capture.release()
        self._capture = None
