"""Seeded damage to files: bytes, lines, cells, keys and parts of archives."""

from __future__ import annotations

import io
import random
import zipfile

NASTY = [
    "nan", "-inf", "1e308", "1e-320", "9" * 30, "-1", "0", "1,234.5", "1.234,5", "1,234", "٣", "５",
    "", " ", '"', "'", ";", ",", "\t", "|", "\\", "\x00", "\x1b]0;x\x07", "\u202e", "\ufeff",
    "=1+1", "@cmd", "<script>", "2θ", "20 kV", "λ/pm", "rate", "1/s", "°", "../x", "/etc/passwd",
    "~", "a" * 300, "[", "]", "{", "}", "[[scan]]", "true", "1979-05-27", "07:32:00", "0x10",
    "1_000", "\r", "\n", "\u2028", "#", "?", "😀", "\ud7ff", "inf", "-0.0", "5.0.0", "1e", "--5",
    "\u22125", "1 234", "1'234",
]  # fmt: skip


def damaged(data: bytes, chance: random.Random) -> bytes:
    """Damage a file, once to four times."""
    for _ in range(chance.choice([1, 1, 2, 4])):
        data = chance.choice(WAYS)(data, chance)
    return data


def _position(data: bytes, chance: random.Random) -> int:
    return chance.randrange(len(data) + 1)


def flip_bytes(data: bytes, chance: random.Random) -> bytes:
    """Change single bytes."""
    changed = bytearray(data)
    for _ in range(chance.randint(1, 8)):
        if changed:
            changed[chance.randrange(len(changed))] = chance.randrange(256)
    return bytes(changed)


def cut(data: bytes, chance: random.Random) -> bytes:
    """Leave out a stretch."""
    start, end = sorted((_position(data, chance), _position(data, chance)))
    return data[:start] + data[min(end, start + chance.choice([1, 5, 50, len(data)])) :]


def repeat(data: bytes, chance: random.Random) -> bytes:
    """Repeat a stretch, a few times or many."""
    start, end = sorted((_position(data, chance), _position(data, chance)))
    times = chance.choice([2, 3, 50])
    return data[:start] + data[start : min(end, start + 400)] * times + data[end:]


def insert_nasty(data: bytes, chance: random.Random) -> bytes:
    """Insert something that means trouble."""
    at = _position(data, chance)
    word = chance.choice(NASTY).encode("utf-8", "replace")
    return data[:at] + word * chance.choice([1, 1, 1, 2, 100]) + data[at:]


def replace_token(data: bytes, chance: random.Random) -> bytes:
    """Replace one token (a number, a word, a cell) by something that means trouble."""
    text = data.decode("latin-1")
    starts = [i for i in range(len(text)) if text[i].isalnum() and not text[i - 1 : i].isalnum()]
    if not starts:
        return data
    start = chance.choice(starts)
    end = start
    while end < len(text) and (text[end].isalnum() or text[end] in "._"):
        end += 1
    word = chance.choice(NASTY).encode("utf-8", "replace")
    return data[:start] + word + data[end:]


def change_digits(data: bytes, chance: random.Random) -> bytes:
    """Change a few digits, so that most of it stays what it is."""
    changed = bytearray(data)
    spots = [i for i, byte in enumerate(data) if 48 <= byte <= 57]
    for spot in chance.sample(spots, min(len(spots), chance.randint(1, 4))):
        changed[spot] = chance.randrange(48, 58)
    return bytes(changed)


def replace_value(data: bytes, chance: random.Random) -> bytes:
    """Give a key of a run sheet another value that TOML allows."""
    lines = data.split(b"\n")
    keyed = [i for i, line in enumerate(lines) if b"=" in line]
    if not keyed:
        return data
    at = chance.choice(keyed)
    lines[at] = lines[at].split(b"=")[0] + b"= " + chance.choice(VALUES).encode()
    return b"\n".join(lines)


VALUES = [
    "1.0", "-1.0", "0", "0.0", "1e-300", "1e300", "inf", "-inf", "nan", "true", '"x"', '""', "[]",
    "[1, [2]]", "{}", "{ value = 1.0, u = 0.01 }", "{ value = 1.0, half_width = 0.5 }",
    "{ value = 0.5, u = 1e300 }", "{ value = 20.0, expanded = 0.1, k = 2, dof = 3 }",
    '{ value = 5.0, half_width = 0.1, distribution = "arcsine" }', "2026-03-12", "07:00:00", '"W"',
    '"theta"', '"comma"', "20", "99999999999999999999", "0x7fffffffffffffff",
    '"a.csv"', '"\\u0000"',
]  # fmt: skip


def shuffle_lines(data: bytes, chance: random.Random) -> bytes:
    """Swap, double or drop lines."""
    lines = data.split(b"\n")
    for _ in range(chance.randint(1, 3)):
        i, j = chance.randrange(len(lines)), chance.randrange(len(lines))
        action = chance.choice("sdx")
        if action == "s":
            lines[i], lines[j] = lines[j], lines[i]
        elif action == "d":
            lines.insert(j, lines[i])
        elif len(lines) > 1:
            del lines[i]
    return b"\n".join(lines)


def other_encoding(data: bytes, chance: random.Random) -> bytes:
    """Write the text in another encoding."""
    text = data.decode("utf-8", "replace")
    encoding = chance.choice(["utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "latin-1", "utf-32"])
    return text.encode(encoding, "replace")


def other_separator(data: bytes, chance: random.Random) -> bytes:
    """Exchange separators and decimal marks."""
    old, new = chance.sample([b",", b";", b"\t", b" ", b".", b"|"], 2)
    return data.replace(old, new)


WAYS = (
    change_digits,
    change_digits,
    change_digits,
    replace_value,
    replace_value,
    flip_bytes,
    cut,
    repeat,
    insert_nasty,
    insert_nasty,
    replace_token,
    replace_token,
    replace_token,
    shuffle_lines,
    other_encoding,
    other_separator,
)


def damaged_archive(data: bytes, chance: random.Random) -> bytes:
    """Damage a spreadsheet: its raw bytes, or one part of it and pack it again soundly."""
    if chance.random() < 0.2:
        return damaged(data, chance)
    with zipfile.ZipFile(io.BytesIO(data)) as archive:
        parts = {name: archive.read(name) for name in archive.namelist()}
    weighty = [name for name in parts if "sheet" in name or "content" in name or "workbook" in name]
    name = chance.choice(weighty or list(parts))
    if chance.random() < 0.05:
        del parts[name]
    else:
        parts[name] = chance.choice(XML_WAYS)(parts[name], chance)
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as archive:
        for part, content in parts.items():
            archive.writestr(part, content)
    return stream.getvalue()


def replace_attribute(data: bytes, chance: random.Random) -> bytes:
    """Give one attribute or one piece of text of an XML part another value, still well-formed."""
    text = data.decode("utf-8")
    spots = [i for i, c in enumerate(text) if c in '">' and i + 1 < len(text)]
    start = chance.choice(spots) + 1
    end = start
    while end < len(text) and text[end] not in '"<>':
        end += 1
    values = ["1048576", "16384", "XFD1048576", "-1", "99999999999", "A1", "s", "d", "e", "b", "n"]
    values += [
        "str",
        "inlineStr",
        "float",
        "date",
        "boolean",
        "NaN",
        "1e999",
        "2026-01-01",
        "&#65;",
    ]
    return (text[:start] + chance.choice(values) + text[end:]).encode()


XML_WAYS = (replace_attribute, replace_attribute, replace_attribute, insert_nasty, cut, repeat)
