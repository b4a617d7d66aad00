"""Ways to break a file, each a pure function of its bytes and a random generator."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable
    from random import Random

    Mutation = Callable[[bytes, Random], bytes]

# What people, spreadsheets and transfers put into files.
ODD_WORDS = (
    b"", b"-999", b"-9", b"NaN", b"inf", b"-inf", b"1e308", b"1e-320", b"-1e30", b"9" * 400, b"0x1F", b"1,5",
    b"\xff\xfe",
    b"\xef\xbb\xbf", b"\x00", b"\r", b"\n", b"\n\n\n", b"\t", b";", b",", b",,,,", b'"', b"'", b"#", b"=", b"\\", b"/",
    b"../../x",
    b"END_DATA\n", b"BOTTLE,\n", b"CTD,\n", b"NUMBER_HEADERS = 99999999999\n", b"EXPOCODE", b"CTDPRS",
    b"\xf0\x9f\x90\x9f",
    b"99999999", b"20090231", b"2400", b"DBAR", b"UMOL/L", b"%s%n", b"</td><script>",
)  # fmt: skip


def flip(data: bytes, random: Random) -> bytes:
    """Change single bytes."""
    changed = bytearray(data)
    for _ in range(random.choice((1, 1, 2, 5, 20))):
        changed[random.randrange(len(changed))] = random.randrange(256)
    return bytes(changed)


def cut_end(data: bytes, random: Random) -> bytes:
    """Cut the end off, as a transfer that broke."""
    return data[: random.randrange(len(data))]


def cut_out(data: bytes, random: Random) -> bytes:
    """Take a piece out of the middle."""
    start = random.randrange(len(data))
    return data[:start] + data[start + random.randrange(1, 400) :]


def repeat(data: bytes, random: Random) -> bytes:
    """Put a piece in again, here or elsewhere, once or many times."""
    start = random.randrange(len(data))
    piece = data[start : start + random.randrange(1, 300)] * random.choice((1, 1, 2, 50))
    there = random.randrange(len(data))
    return data[:there] + piece + data[there:]


def insert(data: bytes, random: Random) -> bytes:
    """Put in an odd word or two."""
    for _ in range(random.choice((1, 1, 3))):
        there = random.randrange(len(data) + 1)
        data = data[:there] + random.choice(ODD_WORDS) + data[there:]
    return data


def shuffle_lines(data: bytes, random: Random) -> bytes:
    """Change the order of some lines, or lose or double one."""
    lines = data.split(b"\n")
    one, other = random.randrange(len(lines)), random.randrange(len(lines))
    match random.randrange(4):
        case 0:
            random.shuffle(lines)
        case 1:
            lines[one], lines[other] = lines[other], lines[one]
        case 2:
            del lines[one]
        case _:
            lines.insert(other, lines[one])
    return b"\n".join(lines)


def change_cell(data: bytes, random: Random) -> bytes:
    """Put an odd word in place of one cell of a table of text."""
    lines = data.split(b"\n")
    one = random.randrange(len(lines))
    cells = lines[one].split(b",")
    cells[random.randrange(len(cells))] = random.choice(ODD_WORDS)
    lines[one] = b",".join(cells)
    return b"\n".join(lines)


def change_length(data: bytes, random: Random) -> bytes:
    """Overwrite a few bytes with the numbers that stand for lengths and counts in binary formats."""
    number = random.choice((0, 1, 255, 65_535, 2**31 - 1, 2**32 - 1, 2**62, 2**64 - 1))
    size = random.choice((1, 2, 4, 8))
    piece: bytes = (number % (1 << 8 * size)).to_bytes(size, random.choice(("big", "little")))
    there = random.randrange(len(data))
    return data[:there] + piece + data[there + size :]


MUTATIONS: tuple[Mutation, ...] = (
    flip, cut_end, cut_out, repeat, insert, shuffle_lines, change_cell, change_length,
)  # fmt: skip


def broken(data: bytes, random: Random) -> bytes:
    """Return ``data`` after one to three mutations."""
    for _ in range(random.choice((1, 1, 1, 2, 3))):
        if data:
            mutation: Mutation = random.choice(MUTATIONS)
            data = mutation(data, random)
    return data
