"""Several references: precision counts, nobody dominates, and one that contradicts the others is not heard."""

import numpy as np
import pytest

from hueferry.colour.spaces import linear_srgb_to_oklab
from hueferry.evidence.camera import SIZE
from hueferry.evidence.evidence import Basis
from hueferry.evidence.prior import no_change
from hueferry.evidence.witness import Witness, combine

PRIOR = no_change()
COLOURS = linear_srgb_to_oklab(np.random.default_rng(0).random((300, 3)))


def witness(change: float, *, sure: float = 50.0) -> Witness:
    """A witness whose data say that the exposure changed by `change` (natural logarithm), `sure` times the prior."""
    data = np.zeros(SIZE)
    data[:3] = change
    return Witness(basis=Basis.PAIRS, parameters=data * sure / (1 + sure), precision=sure * PRIOR.precision)


def test_one_witness_is_taken_at_its_word() -> None:
    verdict = combine([witness(0.3)], PRIOR, COLOURS)

    assert verdict.parameters[0] == pytest.approx(0.3 * 50 / 51)
    assert verdict.influence == (1.0,)
    assert verdict.data_share == pytest.approx(50 / 51)


def test_two_equal_witnesses_meet_in_the_middle() -> None:
    verdict = combine([witness(0.30), witness(0.31)], PRIOR, COLOURS)

    assert verdict.parameters[0] == pytest.approx(0.305, rel=0.03)
    assert verdict.influence == pytest.approx((0.5, 0.5), abs=0.05)


def test_the_surer_witness_has_more_influence() -> None:
    verdict = combine([witness(0.30, sure=50), witness(0.31, sure=2)], PRIOR, COLOURS)

    assert verdict.influence[0] > 3 * verdict.influence[1]


def test_one_contradiction_among_eight_is_not_heard() -> None:
    agreeing = [witness(0.3 + 0.005 * step) for step in range(-4, 4)]

    alone = combine(agreeing, PRIOR, COLOURS)
    disturbed = combine([*agreeing, witness(-1.5, sure=500)], PRIOR, COLOURS)

    assert disturbed.influence[-1] < 0.01
    assert disturbed.parameters == pytest.approx(alone.parameters, abs=0.005)


def test_a_silent_witness_changes_nothing() -> None:
    alone = combine([witness(0.3), witness(0.29)], PRIOR, COLOURS)
    with_silence = combine([witness(0.3), witness(0.29), Witness(basis=Basis.NONE)], PRIOR, COLOURS)

    assert with_silence.influence[2] == 0
    assert with_silence.parameters == pytest.approx(alone.parameters, abs=0.01)
