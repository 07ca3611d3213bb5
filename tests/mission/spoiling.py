"""Ways to spoil a file, decided by a seeded generator: the same number spoils in the same way."""

import random
import re

NASTY = (
    "x", "nan", "inf", "-inf", "1e308", "-1e308", "1e400", "1e-320", "0", "-0.0", "-1", "1", "1e12", "1e13", "9" * 20,
    "9" * 400, "0x10", "1_000", "1,5", "1.2.3", "", " ", "true", "false", "null", "[]", "{}", "[[]]", '""', '"x"', "''",
    "2026-12-07", "2026-12-07T00:00:00", "2016-12-31T23:59:60Z", "0001-01-01T00:00:00+23:00", "9999-12-31T23:59:59Z",
    "1956-12-31T00:00:00Z", "2026-366T00:00:00", "25:61:61", "\x00", "\x1b[31m", "\r", "\n", "\t", "\ufeff", "\u2028",
    "🛰", "é", "=1+1", "'", '"', "\\", "#", "<", "&lt;", "]]>", "..", "/dev/zero", "a" * 5000, "[" * 3000, "::", ";",
    ",",
)  # fmt: skip
NUMBER = re.compile(rb"[-+]?\d+(?:\.\d+)?(?:[eE][-+]?\d+)?")
WORD = re.compile(rb"[A-Za-z_][\w-]*")


def spoiled(content: bytes, number: int) -> bytes:
    """The content after one to four faults."""
    chance = random.Random(number)
    for _ in range(chance.choice((1, 1, 1, 2, 4))):
        content = chance.choice(WAYS)(content, chance)
    return content


def _cut(content: bytes, chance: random.Random) -> bytes:
    begin, length = chance.randrange(len(content) + 1), chance.choice((1, 1, 2, 10, 100, 10_000))
    return content[:begin] + content[begin + length :]


def _doubled(content: bytes, chance: random.Random) -> bytes:
    begin, length = chance.randrange(len(content) + 1), chance.choice((1, 10, 100, 1000))
    return content[: begin + length] + content[begin:]


def _another_byte(content: bytes, chance: random.Random) -> bytes:
    at = chance.randrange(len(content) + 1)
    return content[:at] + bytes([chance.randrange(256)]) + content[at + 1 :]


def _nasty_inserted(content: bytes, chance: random.Random) -> bytes:
    at = chance.randrange(len(content) + 1)
    return content[:at] + chance.choice(NASTY).encode() + content[at:]


def _replaced(pattern: re.Pattern, replacement):
    def spoil(content: bytes, chance: random.Random) -> bytes:
        found = list(pattern.finditer(content))
        if not found:
            return _nasty_inserted(content, chance)
        one = chance.choice(found)
        return content[: one.start()] + replacement(chance, found) + content[one.end() :]

    return spoil


def _nasty(chance: random.Random, _found) -> bytes:
    return chance.choice(NASTY).encode()


def _another(chance: random.Random, found) -> bytes:
    return chance.choice(found)[0]


def _lines_shuffled(content: bytes, chance: random.Random) -> bytes:
    lines = content.split(b"\n")
    first, second = chance.randrange(len(lines)), chance.randrange(len(lines))
    lines[first], lines[second] = lines[second], lines[first]
    return b"\n".join(lines)


def _line_dropped(content: bytes, chance: random.Random) -> bytes:
    lines = content.split(b"\n")
    del lines[chance.randrange(len(lines))]
    return b"\n".join(lines)


WAYS = (
    _cut, _doubled, _another_byte, _nasty_inserted, _lines_shuffled, _line_dropped,
    _replaced(NUMBER, _nasty), _replaced(NUMBER, _nasty), _replaced(NUMBER, _another),
    _replaced(WORD, _nasty), _replaced(WORD, _another),
)  # fmt: skip


def with_true_checksums(content: bytes) -> bytes:
    """TLE lines with the checksum that their columns ask for, so that faults behind it are reached."""
    lines = [line[:68] + b"%d" % (_sum(line[:68]) % 10) if len(line) == 69 else line for line in content.split(b"\n")]
    return b"\n".join(lines)


def _sum(line: bytes) -> int:
    return sum(byte - 48 if 48 <= byte <= 57 else byte == 45 for byte in line)


EDGES = (
    "0", "0.0", "1e-9", "1e-6", "0.001", "0.5", "1.0", "10.0", "60.0", "89.999", "90.0", "-90.0", "99.999", "100.0",
    "180.0", "360.0", "1e3", "1e4", "1e6", "1e9", "1e12", "-1.0", "-150.0", "1", "2", "1000", "40000.0",
)  # fmt: skip
FACTORS = (0.0, 1e-6, 0.01, 0.1, 0.5, 0.9, 1.1, 2.0, 10.0, 100.0, 1e6)


def strained(content: bytes, number: int) -> bytes:
    """The content with one to four of its numbers at an edge or scaled: what validation often lets through."""
    chance = random.Random(number)
    for _ in range(chance.choice((1, 1, 2, 4))):
        one = chance.choice(list(NUMBER.finditer(content)) or [re.match(b"", content)])
        edge, scaled = chance.choice(EDGES), repr(float(one[0] or 0) * chance.choice(FACTORS))
        as_wide = re.sub(r"\d", lambda _: chance.choice("0123456789"), one[0].decode())  # columns stay where they are
        content = content[: one.start()] + chance.choice((edge, scaled, as_wide)).encode() + content[one.end() :]
    return content
