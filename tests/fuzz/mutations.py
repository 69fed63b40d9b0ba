"""Ways to spoil a file: its bytes, its lines, its cells and words, its structure."""

from __future__ import annotations

import functools
import gzip
from collections.abc import Callable

import numpy as np

Rng = np.random.Generator

NASTY = (
    b"",
    b"nan",
    b"-nan",
    b"inf",
    b"-inf",
    b"1e999",
    b"-1e308",
    b"1e-320",
    b"0",
    b"-0.0",
    b"-1",
    b"true",
    b"null",
    b"None",
    b"0x1f",
    b"1_000",
    b"1,5",
    b"99999999999999999999999999",
    b'"',
    b"'''",
    b"[",
    b"]]",
    b"{}",
    b"=cmd()",
    b"<script>alert(1)</script>",
    b"&lol;",
    b"a_b%c&d$e^f\\g",
    b"../../etc/passwd",
    b"/dev/zero",
    b"\x00",
    b"\xff\xfe",
    b"\xe2\x80\xae",
    b"\xf0\x9f\x94\xad",
    b"\t",
    b"\r\n",
    b"#",
    b"A" * 5000,
)


def flipped(data: bytes, rng: Rng) -> bytes:
    spoilt = bytearray(data)
    for _ in range(int(rng.integers(1, 9))):
        spoilt[int(rng.integers(len(spoilt)))] = int(rng.integers(256))
    return bytes(spoilt)


def cut(data: bytes, rng: Rng) -> bytes:
    return data[: int(rng.integers(len(data)))]


def hole(data: bytes, rng: Rng) -> bytes:
    first, last = np.sort(rng.integers(0, len(data), 2))
    return data[:first] + data[last:]


def repeated(data: bytes, rng: Rng) -> bytes:
    first, last = np.sort(rng.integers(0, len(data), 2))
    return data[:last] + data[first:last] * int(rng.integers(1, 4)) + data[last:]


def inserted(data: bytes, rng: Rng) -> bytes:
    place = int(rng.integers(len(data)))
    return data[:place] + NASTY[int(rng.integers(len(NASTY)))] + data[place:]


def line_moved(data: bytes, rng: Rng) -> bytes:
    lines = data.split(b"\n")
    line = lines.pop(int(rng.integers(len(lines))))
    lines.insert(int(rng.integers(len(lines) + 1)), line)
    return b"\n".join(lines)


def line_twice(data: bytes, rng: Rng) -> bytes:
    lines = data.split(b"\n")
    place = int(rng.integers(len(lines)))
    return b"\n".join([*lines[:place], lines[place], *lines[place:]])


def line_lost(data: bytes, rng: Rng) -> bytes:
    lines = data.split(b"\n")
    del lines[int(rng.integers(len(lines)))]
    return b"\n".join(lines)


def word_replaced(data: bytes, rng: Rng) -> bytes:
    """One word or cell of a line becomes something nasty, or another word of the file."""
    lines = data.split(b"\n")
    place = int(rng.integers(len(lines)))
    line = lines[place]
    marks = [i for i, byte in enumerate(line) if byte in b" ,=\t[]{}<>\"'"]
    edges = [-1, *marks, len(line)]
    which = int(rng.integers(len(edges) - 1))
    if rng.uniform() < 0.7:
        new = NASTY[int(rng.integers(len(NASTY)))]
    else:
        words = data.split()
        new = words[int(rng.integers(len(words)))] if words else b""
    lines[place] = line[: edges[which] + 1] + new + line[edges[which + 1] :]
    return b"\n".join(lines)


def number_changed(data: bytes, rng: Rng) -> bytes:
    """A digit somewhere becomes another: a file that is often still well formed."""
    digits = [i for i, byte in enumerate(data) if 48 <= byte <= 57]
    if not digits:
        return flipped(data, rng)
    spoilt = bytearray(data)
    spoilt[digits[int(rng.integers(len(digits)))]] = 48 + int(rng.integers(10))
    return bytes(spoilt)


def deep(data: bytes, rng: Rng) -> bytes:
    """Nesting that a recursive parser may not survive."""
    depth = int(rng.integers(50, 20_000))
    return data + b"\nx = " + b"[" * depth + (b"]" * depth if rng.uniform() < 0.5 else b"")


def zipped(data: bytes, rng: Rng) -> bytes:
    """Compressed, though the name does not say so; or zeros that swell when unpacked."""
    return gzip.compress(data if rng.uniform() < 0.5 else bytes(20_000_000))


def entities(data: bytes, rng: Rng) -> bytes:
    """A document type whose entities swell, before what was there."""
    del rng
    declared = b"".join(
        b'<!ENTITY e%d "%s">' % (i, b"&e%d;" % (i - 1) * 10 if i else b"lol") for i in range(9)
    )
    head, mark, rest = data.partition(b"?>")
    body = rest if mark else head
    return head + mark + b"<!DOCTYPE x [" + declared + b"]>" + body.replace(b">", b">&e8;", 3)


def bomb(data: bytes, rng: Rng) -> bytes:
    """Compressed data that go on for 3 GB, as spaces, zeros or lines."""
    return gzip.compress(data) + _swelling(int(rng.integers(3))) * 30


@functools.cache
def _swelling(kind: int) -> bytes:
    return gzip.compress((b" ", b"\x00", b"1,2,3\n")[kind] * (100_000_000 // (1, 1, 6)[kind]), 1)


def other(data: bytes, rng: Rng) -> bytes:
    """Something else altogether."""
    size = int(rng.integers(0, 4000))
    return b"" if rng.uniform() < 0.2 else rng.integers(0, 256, size, dtype=np.uint8).tobytes()


Mutation = Callable[[bytes, Rng], bytes]
_COMMON: tuple[tuple[Mutation, float], ...] = (
    (flipped, 2.0),
    (cut, 1.0),
    (hole, 1.0),
    (repeated, 1.0),
    (inserted, 2.0),
    (other, 0.2),
    (zipped, 0.2),
)
_TEXT: tuple[tuple[Mutation, float], ...] = (
    *_COMMON,
    (line_moved, 1.0),
    (line_twice, 1.0),
    (line_lost, 1.0),
    (word_replaced, 5.0),
    (number_changed, 3.0),
    (deep, 0.2),
    (entities, 0.1),
)
_BINARY: tuple[tuple[Mutation, float], ...] = (*_COMMON, (number_changed, 1.0))
_XML: tuple[tuple[Mutation, float], ...] = (*_TEXT, (entities, 2.0))


def spoilt(data: bytes, suffix: str, rng: Rng) -> tuple[bytes, str]:
    """The data after one to three mutations, and the names of these."""
    if suffix == ".gz" and rng.uniform() < 0.8:  # what is inside
        inside, how = _mutated(gzip.decompress(data), _TEXT, rng)
        packed = bomb(inside, rng) if rng.uniform() < 0.05 else gzip.compress(inside)
        return packed, f"{how}, inside"
    kinds = {".fits": _BINARY, ".parquet": _BINARY, ".npy": _BINARY, ".vot": _XML}
    kinds |= {".gz": _BINARY, ".nc": _BINARY}
    return _mutated(data, kinds.get(suffix, _TEXT), rng)


def _mutated(
    data: bytes, choices: tuple[tuple[Mutation, float], ...], rng: Rng
) -> tuple[bytes, str]:
    weight = np.array([w for _, w in choices])
    names = []
    for _ in range(int(rng.choice([1, 1, 1, 2, 3]))):
        mutation = choices[int(rng.choice(len(choices), p=weight / weight.sum()))][0]
        data = mutation(data, rng) if data else data
        names.append(mutation.__name__)
    return data, " + ".join(names)
