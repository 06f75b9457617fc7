"""Streams are keyed by what they are for."""

from itertools import product

import numpy as np

from pricer.core.randomness import Purpose, stream


def test_a_stream_is_a_function_of_its_key():
    draws = [stream(7, "T1", Purpose.PRICE, 3).random(4) for _ in range(2)]
    np.testing.assert_array_equal(*draws)


def test_every_part_of_the_key_matters():
    keys = product((1, 2), ("T1", "T2"), (Purpose.PRICE, Purpose.CERTIFY), (0, 1))
    firsts = {float(stream(*key).random()) for key in keys}
    assert len(firsts) == 16
