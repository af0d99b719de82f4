"""decode(encode(c)) = c, for results of logs of many kinds."""

import dataclasses
import json
from collections.abc import Mapping

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from tests.conftest import made_noise

from stillbench.archive.codec import decode, encode
from stillbench.pipeline import characterize


def same(one: object, other: object) -> bool:
    """Equality of nouns with arrays in them; NaN equals NaN, a mapping equals one with the same items."""
    if dataclasses.is_dataclass(one) and not isinstance(one, type):
        return type(one) is type(other) and all(
            same(getattr(one, field.name), getattr(other, field.name)) for field in dataclasses.fields(one)
        )
    if isinstance(one, np.ndarray):
        return isinstance(other, np.ndarray) and np.array_equal(one, other, equal_nan=True)
    if isinstance(one, Mapping):
        return (
            isinstance(other, Mapping) and list(one) == list(other) and all(same(one[key], other[key]) for key in one)
        )
    if isinstance(one, tuple | list):
        return isinstance(other, tuple | list) and len(one) == len(other) and all(map(same, one, other))
    return one == other


@settings(max_examples=12)
@given(
    n_samples=st.integers(40, 3_000),
    unit=st.sampled_from(["deg/s", "m/s^2", "V", "count", "uT"]),
    walk=st.sampled_from([0.0, 0.1]),
    spike=st.booleans(),
    label=st.text(min_size=1, max_size=12).filter(lambda text: text.strip() == text and not text.isdecimal()),
)
def test_decode_undoes_encode(*, n_samples: int, unit: str, walk: float, spike: bool, label: str) -> None:
    log = made_noise(n_samples, n_samples, white=1.0, walk=walk)
    if spike:
        log[n_samples // 2] += 100.0
    result = characterize({label: log}, rate=10.0, unit=unit, made_at="2026-01-01")
    encoded = encode(result)
    decoded = decode(encoded)
    assert same(decoded, result)
    assert encode(decoded) == encoded
    assert encoded.isascii()
    assert next(iter(json.loads(encoded))) == "schema"
