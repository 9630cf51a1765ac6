"""From the text that names a source to an observer of it."""

from __future__ import annotations

from readout.capture.open import SourceKind, describe_source, open_source
from readout.instrument.observer import DirectObserver, Observer
from readout.instrument.preparing import Preparing
from readout.model import Target


def open_observer(
    source: str, target: Target, *, paced: bool = False, preparing: Preparing | None = None
) -> Observer:
    """The observer for a source, not yet entered. Raises BadInput for a text that names none.

    A camera is observed in a process of its own, because its driver may hang; everything else in
    the calling thread. ``paced``: a folder or video comes at its own speed. ``preparing``:
    what is known of the camera.
    """
    if describe_source(source).kind is SourceKind.USB:
        from readout.instrument.child import ChildObserver

        return ChildObserver(source, target=target, preparing=preparing)
    from readout.sighting import locate

    return DirectObserver(
        open_source(source, paced=paced), target=target, locate=locate, preparing=preparing
    )
