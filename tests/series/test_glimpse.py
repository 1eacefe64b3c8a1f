"""What a page shows of a picture."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.picture import Window
from hueferry.series.glimpse import largest_change, take_glimpse
from photographs import photograph, picture


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.float32])
def test_the_spot_is_where_codes_changed_most(dtype: type) -> None:
    before = np.zeros((500, 800, 3), dtype)
    after = before.copy()
    after[190:300, 370:500] = 1
    after[0:40, 0:40] = 1

    assert largest_change(picture(before), picture(after)) == Window(180, 360, 180, 180)


@pytest.mark.parametrize("shape", [(1, 1, 3), (7, 900, 3), (200, 3, 1), (181, 179, 4)])
def test_pictures_of_any_shape_have_a_spot_within(shape: tuple[int, int, int]) -> None:
    blank = picture(np.zeros(shape, np.uint8))

    found = largest_change(blank, blank)

    assert found.top + found.height <= shape[0]
    assert found.left + found.width <= shape[1]


def test_the_more_pictures_a_page_has_the_smaller_they_are() -> None:
    shown = picture(photograph("china", step=1)[:420, :600])

    few, many, most = (take_glimpse(shown, shown, count=count) for count in (3, 100, 500))

    assert (few.width, few.height) == (600, 420)
    assert max(many.width, many.height) <= 420
    assert max(most.width, most.height) <= 200
    assert few.spot is not None
    assert many.spot is None
