"""The prior: centred on no change, and moved by metadata no further than it says."""

import numpy as np
import pytest

from hueferry.evidence.prior import EXPOSURE_STOPS, SPREAD, no_change


def test_nothing_known_is_centred_on_no_change() -> None:
    prior = no_change()

    assert not prior.mean.any()
    exposure = prior.deviations[0] ** 2 - SPREAD["gain_red"] ** 2
    assert np.sqrt(exposure) / np.log(2) == pytest.approx(EXPOSURE_STOPS)


def test_equal_exposure_values_make_the_exposure_surer() -> None:
    told = no_change(source_exposure=12.0, reference_exposure=12.0)

    assert not told.mean.any()
    assert told.deviations[0] < no_change().deviations[0]


def test_a_reference_exposed_higher_is_expected_darker_but_not_by_all_of_it() -> None:
    told = no_change(source_exposure=12.0, reference_exposure=13.0)

    assert (told.mean[:3] < 0).all()
    assert (told.mean[:3] > -np.log(2) / 2).all()
    assert not told.mean[3:].any()


def test_one_value_alone_says_nothing() -> None:
    told = no_change(source_exposure=12.0)

    assert np.array_equal(told.precision, no_change().precision)
