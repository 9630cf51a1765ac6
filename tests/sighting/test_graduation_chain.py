"""Even steps among many places: exact cases."""

from __future__ import annotations

import numpy as np

from readout.sighting.graduation_chain import best_chain


def test_counts_over_a_gap() -> None:
    places = [10.0 + 20 * n for n in (0, 1, 2, 5, 6, 7, 8)]
    chain = best_chain(places, least_step=4.0)
    assert chain is not None
    assert chain.numbers == [0, 1, 2, 5, 6, 7, 8]
    assert chain.members == list(range(7))
    assert chain.score == 7 - 2


def test_places_out_of_sight_are_not_missing() -> None:
    places = [10.0 + 20 * n for n in (0, 1, 2, 5, 6, 7, 8)]
    seen = [not 60 < column < 105 for column in range(200)]
    chain = best_chain(places, least_step=4.0, seen=seen)
    assert chain is not None
    assert chain.score == 7


def test_takes_the_step_and_neither_half_nor_twice_of_it() -> None:
    places = [3.0 + 12.5 * n for n in range(12)]
    chain = best_chain(places, least_step=3.0)
    assert chain is not None
    assert chain.numbers == list(range(12))


def test_passes_over_strangers() -> None:
    marks = [10.0 + 20 * n for n in range(9)]
    places = sorted([*marks, 37.0, 98.5])
    chain = best_chain(places, least_step=4.0)
    assert chain is not None
    assert [places[k] for k in chain.members] == marks


def test_follows_a_lens_that_stretches_the_steps() -> None:
    at = np.arange(-15, 16)
    places = (200 + 12.0 * at * (1 + 4e-4 * at**2)).tolist()  # the last step is 1.27 of the first
    chain = best_chain(places, least_step=4.0)
    assert chain is not None
    assert chain.numbers == list(range(31))


def test_none_among_few_or_uneven_places() -> None:
    assert best_chain([1.0, 2.0], least_step=0.5) is None
    assert best_chain([0.0, 10.0, 33.0, 71.0, 140.0, 260.0], least_step=4.0) is None
