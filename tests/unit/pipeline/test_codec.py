"""Results to bytes and back."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from topovet.pipeline.codec import Codec, CodecError


@dataclass(frozen=True)
class Inner:
    label: str
    values: np.ndarray


@dataclass(frozen=True)
class Outer:
    inner: tuple[Inner, ...]
    note: str | None
    number: float


@dataclass(frozen=True)
class Stranger:
    value: int


CODEC = Codec((Inner, Outer))


def test_round_trip_keeps_every_bit() -> None:
    values = np.array([[0.1, -np.inf], [np.pi, 5e-324]])
    value = Outer((Inner("ü <b>", values), Inner("", np.arange(3) * 1j)), None, 0.1 + 0.2)
    back = CODEC.decode(CODEC.encode(value))
    assert back.note is None
    assert back.number == value.number
    assert [i.label for i in back.inner] == ["ü <b>", ""]
    np.testing.assert_array_equal(back.inner[0].values, values)
    np.testing.assert_array_equal(back.inner[1].values, np.arange(3) * 1j)
    assert back.inner[1].values.dtype == np.complex128


@pytest.mark.parametrize("value", [(1, (2.5, "x"), [True, None]), {"a": {"b": (1,)}}, "text", 3])
def test_plain_data(value: object) -> None:
    assert CODEC.decode(CODEC.encode(value)) == value


@pytest.mark.parametrize("value", [Stranger(1), {1, 2}, np.array(["a"]), np.array([object()])])
def test_foreign_data_is_refused_when_written(value: object) -> None:
    with pytest.raises(TypeError):
        CODEC.encode(value)


def test_every_cut_is_noticed() -> None:
    data = CODEC.encode(Inner("x", np.arange(10.0)))
    for end in range(0, len(data), 7):
        with pytest.raises(CodecError):
            CODEC.decode(data[:end])


def test_unknown_type_is_refused_when_read() -> None:
    data = Codec((Stranger,)).encode(Stranger(1))
    with pytest.raises(CodecError):
        CODEC.decode(data)


def test_object_arrays_are_never_unpickled() -> None:
    import io

    buffer = io.BytesIO()
    np.savez(buffer, document=np.array([{"a": 1}], dtype=object))
    with pytest.raises(CodecError):
        CODEC.decode(buffer.getvalue())
