"""New inputs from old ones: bytes, pieces of text and whole lines are changed, and junk that has a meaning put in."""

from __future__ import annotations

import random
import re
from collections.abc import Sequence

__all__ = ["mutated"]

_TOKEN = re.compile(rb'"[^"\n]*"|[A-Za-z_\x80-\xff][\w\x80-\xff]*|[0-9.]+(?:[eE][+-]?[0-9]+)?|\s+|.', re.DOTALL)
_NUMBER = re.compile(rb"(?<![\w.])[0-9.]+(?:[eE][+-]?[0-9]+)?")
_NUMBERS = [
    b"0",
    b"1",
    b"2",
    b"0.5",
    b"1e-9",
    b"1e9",
    b"1e150",
    b"1e-150",
    b"0.1",
    b"1000",
    b"1/7",
    b"3e2",
    b"-1",
    b"1e999",
]

#: What hurts texts of every sort.
_ODD = [
    b"",
    b" ",
    b"\n",
    b"\r\n",
    b"\t",
    b"\x00",
    b"\xef\xbb\xbf",
    b"\xff",
    b"\xe2\x80\xae",
    b"\xf0\x9d\x9b\xbd",
    b"(" * 60,
    b"-" * 60,
    b"9" * 400,
    b"1e-999999999",
    b"1e999999999",
    b"1e300",
    b"1e-300",
    b"\xce\xb2",
    b"\xc2\xb5",
    b"\xd9\xa3",
    b"__class__",
    b"<script>",
    b"\\input{x}",
]


def mutated(data: bytes, rng: random.Random, words: Sequence[bytes], others: Sequence[bytes], most: int) -> bytes:
    """Return a changed copy.

    Parameters
    ----------
    data : bytes
        The input to start from.
    rng : random.Random
        Decides everything, so that a seed gives the same input again.
    words : sequence of bytes
        Pieces that mean something to the reader at hand.
    others : sequence of bytes
        Inputs to take pieces from.
    most : int
        Bytes of the result.
    """
    for _ in range(rng.choice([1, 1, 1, 1, 2, 4])):
        change = rng.choice([_byte, _token, _token, _number, _number, _lines, _splice])
        data = change(data, rng, words, others)
    return data[:most]


def _byte(data: bytes, rng: random.Random, words: Sequence[bytes], others: Sequence[bytes]) -> bytes:
    at = rng.randint(0, len(data))
    kept = at + rng.choice([0, 0, 1, 1, 2, 8])
    new = bytes([rng.randrange(256)]) if rng.random() < 0.3 else rng.choice(_ODD)
    return data[:at] + new + data[kept:]


def _token(data: bytes, rng: random.Random, words: Sequence[bytes], others: Sequence[bytes]) -> bytes:
    tokens = _TOKEN.findall(data)
    if not tokens:
        return rng.choice(words)
    at = rng.randrange(len(tokens))
    draw = rng.random()
    if draw < 0.15:
        del tokens[at]
    elif draw < 0.3:
        tokens.insert(at, rng.choice(tokens))
    elif draw < 0.45:
        other = rng.randrange(len(tokens))
        tokens[at], tokens[other] = tokens[other], tokens[at]
    elif draw < 0.55:
        tokens[at] = rng.choice(_ODD)
    elif draw < 0.85:
        tokens[at] = rng.choice(words)
    else:
        tokens.insert(at, rng.choice(words))
    return b"".join(tokens)


def _number(data: bytes, rng: random.Random, words: Sequence[bytes], others: Sequence[bytes]) -> bytes:
    places = [(found.start(), found.end()) for found in _NUMBER.finditer(data)]
    if not places:
        return _token(data, rng, words, others)
    start, end = rng.choice(places)
    return data[:start] + rng.choice(_NUMBERS) + data[end:]


def _lines(data: bytes, rng: random.Random, words: Sequence[bytes], others: Sequence[bytes]) -> bytes:
    lines = data.split(b"\n")
    at, other = rng.randrange(len(lines)), rng.randrange(len(lines))
    draw = rng.random()
    if draw < 0.3:
        del lines[at]
    elif draw < 0.6:
        lines.insert(other, lines[at])
    elif draw < 0.8:
        lines[at], lines[other] = lines[other], lines[at]
    else:
        del lines[min(at, other) : max(at, other)]
    return b"\n".join(lines)


def _splice(data: bytes, rng: random.Random, words: Sequence[bytes], others: Sequence[bytes]) -> bytes:
    mine, theirs = data.split(b"\n"), rng.choice(others).split(b"\n")
    at = rng.randrange(len(theirs))
    piece = theirs[at : at + rng.choice([1, 1, 2, 6])]
    place = rng.randint(0, len(mine))
    return b"\n".join([*mine[:place], *piece, *mine[place:]])
