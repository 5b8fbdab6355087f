"""Frames are found whatever the pieces in which they come, and nothing but the frame in hand is held."""

import random

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.io.mllp import HEAD, Event, Fault, Frame, Framer, framed

LARGEST = 12
# Bytes that mean something, and some that do not.
STREAMS = st.lists(
    st.sampled_from([b"\x0b", b"\x1c", b"\r", b"\x1c\r", b"a", b"\xff", b"\n", b"MSH|"]), max_size=60
).map(b"".join)


def events(pieces: list[bytes], largest: int = LARGEST) -> list[Event]:
    framer = Framer(largest)
    return [event for piece in pieces for event in framer.feed(piece)] + framer.end()


def test_a_frame_is_its_content() -> None:
    assert events([b"\x0bMSH|\r\x1c\r"]) == [Frame(b"MSH|\r")]
    assert events([framed(b"MSH|"), framed(b"PID|")]) == [Frame(b"MSH|"), Frame(b"PID|")]


def test_several_frames_in_one_piece_and_one_in_several() -> None:
    assert events([framed(b"one") + framed(b"two")[:3], framed(b"two")[3:]]) == [Frame(b"one"), Frame(b"two")]
    assert events([b"\x0bone\x1c", b"\r"]) == [Frame(b"one")]


def test_the_first_byte_of_an_end_alone_is_no_end() -> None:
    assert events([b"\x0bone\x1ctwo\x1c\r"]) == [Frame(b"one\x1ctwo")]
    assert events([b"\x0bone\x1c\x1c\r"]) == [Frame(b"one\x1c")]


def test_bytes_outside_a_frame_are_told_and_do_no_harm() -> None:
    assert events([b"\r\n?", framed(b"one"), b"\r\n", framed(b"two"), b"!"]) == [
        Fault("outside", 3),
        Frame(b"one"),
        Fault("outside", 2),
        Frame(b"two"),
        Fault("outside", 1),
    ]


def test_a_start_inside_a_frame_begins_another() -> None:
    assert events([b"\x0bhalf of on", framed(b"one")]) == [Fault("broken off", 10), Frame(b"one")]
    assert events([b"\x0bhalf"]) == [Fault("broken off", 4)]


def test_a_frame_of_the_largest_size_is_taken_and_one_byte_more_is_not() -> None:
    assert events([framed(b"x" * LARGEST)]) == [Frame(b"x" * LARGEST)]
    too_long, after = events([framed(b"x" * (LARGEST + 1)), framed(b"after")])
    assert isinstance(too_long, Fault)
    assert (too_long.kind, too_long.head) == ("too long", b"x" * (LARGEST + 1) + b"\x1c")
    assert after == Frame(b"after")


def test_of_a_frame_that_is_too_long_no_more_than_a_head_is_kept() -> None:
    framer = Framer(10 * HEAD)
    [fault] = framer.feed(b"\x0b" + b"x" * 100 * HEAD)
    assert isinstance(fault, Fault)
    assert fault.head == b"x" * HEAD
    assert framer.feed(b"y" * 1000) == []
    assert framer.feed(framed(b"after")) == [Frame(b"after")]


@given(STREAMS, st.integers(0, 20))
def test_whole_and_byte_by_byte_give_the_same_events(stream: bytes, largest: int) -> None:
    assert events([stream], largest) == events([bytes([one]) for one in stream], largest)


@given(STREAMS, st.integers(0, 20), st.randoms(use_true_random=False))
def test_pieces_of_any_size_give_the_same_events(stream: bytes, largest: int, chance: random.Random) -> None:
    cuts = sorted(chance.randrange(len(stream) + 1) for _ in range(5))
    pieces = [stream[begin:end] for begin, end in zip([0, *cuts], [*cuts, len(stream)], strict=True)]
    assert events(pieces, largest) == events([stream], largest)


@given(STREAMS, st.integers(0, 20))
def test_no_more_than_the_frame_in_hand_is_held(stream: bytes, largest: int) -> None:
    framer = Framer(largest)
    for one in stream:
        framer.feed(bytes([one]))
        assert len(framer._held) <= largest + 2


@given(st.lists(st.binary(max_size=40).filter(lambda one: b"\x0b" not in one and not {0x1C} & set(one)), max_size=8))
def test_what_is_framed_comes_out_as_it_went_in(contents: list[bytes]) -> None:
    assert events([b"".join(map(framed, contents))], 40) == [Frame(one) for one in contents]


@pytest.mark.parametrize(
    "stream", [b"\x0b\x1c\r" * 50_000, b"\x0b" * 100_000, b"x" * 300_000], ids=["empty", "starts", "noise"]
)
def test_many_small_pieces_of_nothing_take_no_time_that_grows(stream: bytes) -> None:
    """A quadratic search would take minutes here, and the test a time-out."""
    framer = Framer(1_000_000)
    framer.feed(stream)
    framer.feed(b"\x0b")
    for place in range(0, 200_000, 2):
        framer.feed(b"ab" if place % 1000 else b"\r\x1c")
    assert framer.feed(b"\x1c\r")
