import numpy as np
import pytest

from drivers.foreign.framing import BrokenFrameError, packed, receive


def reader(data, at_most=7):
    rest = bytearray(data)

    def read(size):
        part = bytes(rest[: min(size, at_most)])
        del rest[: len(part)]
        return part

    return read


def test_a_message_comes_through_in_pieces():
    numbers = np.array([0.1, np.nan, -0.0, 5e-324])
    header, received = receive(reader(packed({"a": [1, "é"]}, [numbers[:1], numbers[1:]])))
    assert header == {"a": [1, "é"]}
    assert received.tobytes() == numbers.tobytes()


@pytest.mark.parametrize("cut", [0, 5, 17, 30])
def test_a_message_that_ends_early_is_the_end(cut):
    with pytest.raises(EOFError):
        receive(reader(packed({"a": 1}, [np.ones(3)])[:cut]))


@pytest.mark.parametrize(
    "data",
    [
        b"x" * 64,
        packed({"a": 1}).replace(b'{"a"', b'{"a]'),
        packed({"a": 1}).replace(b'{"a": 1}', b"[1, 2, 3"),
        b"cpf1" + b"\xff" * 60,
    ],
)
def test_bytes_that_are_no_message_are_refused(data):
    with pytest.raises(BrokenFrameError):
        receive(reader(data))
