"""The recogniser: its likelihood against a slow and obvious sum, its reading of drawn print."""

import itertools
import socket

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from PIL import Image, ImageDraw, ImageFont

from digitize.recogniser import Recogniser, recogniser

LETTERS = ("", "V", "a", "1")  # the blank and three letters stand for the whole alphabet


def alphabet() -> str:
    """What the network can say, in the order of its output after the blank."""
    reader = recogniser()
    letters = reader.probabilities([np.full((20, 30), 255, np.uint8)])[0].shape[1]
    # One letter for certain at each step; in parts, for the square of it all is large.
    parts = (np.eye(500, letters, start, dtype=bool) for start in range(1, letters, 500))
    return "".join(reader.text(part)[0] for part in parts)


@pytest.fixture(scope="module")
def columns() -> dict[str, int]:
    """Column of each of the few letters in the network's output, and how many there are."""
    known = alphabet()
    return {letter: known.index(letter) + 1 if letter else 0 for letter in LETTERS} | {
        "all": len(known) + 1
    }


def spread(few: np.ndarray, columns: dict[str, int]) -> np.ndarray:
    """Probabilities over the few letters, written into the whole alphabet."""
    full = np.zeros((len(few), columns["all"]))
    full[:, [columns[letter] for letter in LETTERS]] = few
    return full


def by_all_alignments(few: np.ndarray, name: str) -> float:
    """Sum over every way to say a name: repeats are merged, then blanks are dropped."""
    total = 0.0
    for path in itertools.product(range(len(LETTERS)), repeat=len(few)):
        merged = [k for k, _ in itertools.groupby(path)]
        if "".join(LETTERS[k] for k in merged) == name:
            total += float(np.prod(few[np.arange(len(few)), path]))
    return total


@given(
    name=st.sampled_from(["V", "V1", "aV", "VV", "a1", "111", "aV1"]),
    steps=st.integers(3, 6),
    seed=st.integers(0, 10_000),
)
def test_likelihood_is_the_sum_over_all_alignments(columns, name, steps, seed):
    few = np.random.default_rng(seed).dirichlet(np.ones(len(LETTERS)), steps)
    expected = by_all_alignments(few, name)
    found = np.exp(recogniser().likelihood(spread(few, columns), name))
    # Each of the 4**6 alignments may gain 1e-12 for letters that have no probability at all.
    assert found == pytest.approx(expected, rel=1e-6, abs=1e-8)


def test_free_reading_merges_repeats_and_drops_blanks(columns):
    few = np.full((7, 4), 0.02)
    for step, letter in enumerate(("", "a", "a", "", "V", "1", "1")):
        few[step, LETTERS.index(letter)] = 0.94
    text, score = recogniser().text(spread(few, columns))
    assert text == "aV1"
    assert score == pytest.approx(0.94)


def test_a_crop_with_nothing_on_it_says_nothing():
    assert recogniser().text(recogniser().probabilities([np.full((30, 90), 255, np.uint8)])[0]) == (
        "",
        0.0,
    )


def printed(text: str, size: int = 34) -> np.ndarray:
    """A word in black on white."""
    font = ImageFont.load_default(size)
    left, top, right, bottom = (round(v) for v in font.getbbox(text))
    image = Image.new("L", (right - left + 16, bottom - top + 16), 255)
    ImageDraw.Draw(image).text((8 - left, 8 - top), text, 0, font)
    return np.asarray(image)


@pytest.mark.parametrize("text", ["aVR", "V1", "V6", "25 mm/s", "10 mm/mV", "0.05-150 Hz"])
def test_drawn_words_are_read(text):
    found, score = recogniser().text(recogniser().probabilities([printed(text)])[0])
    assert found.replace(" ", "") == text.replace(" ", "")
    assert score > 0.8


def test_crops_read_together_say_what_each_says_alone():
    crops = [printed(t) for t in ("V4", "25 mm/s 10 mm/mV", "aVF", "II")]
    together = [recogniser().text(p)[0] for p in recogniser().probabilities(crops)]
    alone = [recogniser().text(recogniser().probabilities([crop])[0])[0] for crop in crops]
    assert together == alone


def test_the_model_is_on_the_machine_already(monkeypatch):
    def refuse(*args: object, **kwargs: object) -> None:
        raise AssertionError("the network was asked for something")

    monkeypatch.setattr(socket.socket, "connect", refuse)
    monkeypatch.setattr(socket, "getaddrinfo", refuse)
    reader = Recogniser()
    assert reader.text(reader.probabilities([printed("V2")])[0])[0] == "V2"
