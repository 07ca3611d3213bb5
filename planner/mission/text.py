"""Reading a user's file as text or as TOML, and saying what is wrong with it."""

import codecs
import difflib
import hashlib
import re
import stat
import tomllib
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from planner.errors import InputError

LARGEST_FILE_BYTES = 50_000_000
MOST_LINES = 600_000  # with what is kept of each line, some hundred MB
LINE_ENDS = "\n\r\v\f\x1c\x1d\x1e\x85\u2028\u2029"  # as str.splitlines has them
LONGEST_VALUE_SHOWN = 60
DECIMAL_COMMA = re.compile(r"(?<![\d,.])[-+]?\d+,\d+(?![\d,])")
# What a line of TOML that cannot be read often holds, and the mend
TOML_MENDS = (
    (re.compile(r"=\s*[-+]?\d+,\d"), "write decimals with a point"),
    (re.compile(r"\d:\d\d:60"), "a leap second cannot be written, take the second before it or after"),
    (re.compile(r"[“”„]"), "write straight quotes"),
    # before any text or comment, and no offset from UTC
    (re.compile(r"""^[^"'#]*?(?<![\d:+-])\d{1,2}:\d\d(?![\d:])"""), "times of day need seconds, such as 06:00:00"),
)
# What a file that is no TOML often is instead
OTHER_KINDS = (
    (re.compile(r"^1 [\w ]{5}[A-Z ] ", re.MULTILINE), "a two-line element set"),
    (re.compile(r"\A\s*<"), "XML"),
    (re.compile(r"\A\s*(\{|\[\s*\{)"), "JSON"),
    (re.compile(r"\A[^#=\n][^=\n]*,[^=\n]+,"), "a CSV table"),
)


def read_bytes(path: Path) -> bytes:
    """The file's bytes; InputError if it is missing, not a regular file, unreadable or over 50 MB."""
    try:
        status = path.stat()
        if stat.S_ISREG(status.st_mode) and status.st_size <= LARGEST_FILE_BYTES:
            return path.read_bytes()
    except FileNotFoundError:
        raise InputError(f"{path}: no such file{_nearest_file(path)}") from None
    except (OSError, ValueError) as error:
        raise InputError(f"{path}: cannot be read: {getattr(error, 'strerror', None) or error}") from None
    if not stat.S_ISREG(status.st_mode):
        inside = path / "contacts.csv"
        mend = f"; did you mean {inside}?" if inside.is_file() else ""
        raise InputError(f"{path}: must be a regular file, got {_kind(status.st_mode)}{mend}")
    raise InputError(f"{path}: must be at most 50 MB, got {status.st_size / 1e6:.1f} MB")


def _kind(mode: int) -> str:
    return "a folder" if stat.S_ISDIR(mode) else "a device or pipe"


def read_text(path: Path) -> str:
    """The file as text, without a byte-order mark.

    Raises
    ------
    InputError : it is not UTF-8, holds a NUL, or has too many lines
    """
    content = read_bytes(path)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise _no_text(path, content, error.start) from None
    if "\0" in text:
        raise _no_text(path, content, content.index(0))
    lines = sum(map(text.count, LINE_ENDS)) - text.count("\r\n")
    if lines > MOST_LINES:
        raise InputError(f"{path}: must have at most {MOST_LINES} lines, got {lines}")
    return text


def _no_text(path: Path, content: bytes, at: int) -> InputError:
    wide = content.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)) or content[:200].count(0) > 20
    mend = "; it looks like UTF-16, save it as UTF-8" if wide else ""
    return InputError(f"{path}: must be UTF-8 text, byte {at} is {content[at]:#04x}{mend}")


def read_toml(path: Path) -> dict[str, Any]:
    """The file's tables, lists as tuples; InputError with line and column where it is not TOML."""
    text = read_text(path).replace("\r\n", "\n")
    try:
        return _with_tuples(tomllib.loads(text))
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path}: must be TOML: {error}{_toml_line(text, str(error))}") from None
    except RecursionError:
        raise InputError(f"{path}: must be TOML: nested too deeply") from None


def _toml_line(text: str, error: str) -> str:
    """The line that an error tells the number of, as ", got 'soc_pct = 92,0'; write decimals with a point"."""
    told = re.search(r"at line (\d+)", error)
    line = text.split("\n")[int(told[1]) - 1].strip() if told else ""
    mends = [f"; it looks like {kind}" for pattern, kind in OTHER_KINDS if pattern.search(text)]
    mends += [f"; {mend}" for pattern, mend in TOML_MENDS if pattern.search(line)]
    return (f", got {shown(line)}" if line else "") + "".join(mends[:1])


def decimals(text: str) -> str:
    """The mend to stand behind a fault in a number: "; write decimals with a point", or nothing."""
    return "; write decimals with a point" if DECIMAL_COMMA.search(text) else ""


def sha256(path: Path) -> str:
    return hashlib.sha256(read_bytes(path)).hexdigest()


def nearest(word: str, known: Iterable[str]) -> str:
    """'; did you mean "soc_floor_pct"?' or nothing."""
    by_folded = {name.casefold(): name for name in known if name.isprintable()}
    close = difflib.get_close_matches(str(word).casefold(), by_folded, n=1, cutoff=0.6)
    return f'; did you mean "{by_folded[close[0]]}"?' if close else ""


def shown(value: Any) -> str:
    """A value as a message shows it: one short line."""
    text = value.isoformat() if hasattr(value, "isoformat") else repr(value)
    text = text.encode("unicode_escape").decode() if not text.isprintable() else text
    return text if len(text) <= LONGEST_VALUE_SHOWN else text[: LONGEST_VALUE_SHOWN - 1] + "…"


def faults_of(path: Path | str, error: ValidationError, raw: Any, model: type | None = None) -> list[str]:
    """One line per fault that pydantic found: file, key, rule, value received."""
    entries = [entry for entry in error.errors(include_url=False) if not _only_shrunk(entry)]
    return [_fault(path, entry, raw, model) for entry in entries]


def _only_shrunk(entry: Mapping[str, Any]) -> bool:
    """A list counted as too short only because entries of it are at fault, which is told already."""
    return entry["type"] == "too_short" and len(entry["input"]) >= entry["ctx"]["min_length"]


def _fault(path: Path | str, entry: Mapping[str, Any], raw: Any, model: type | None) -> str:
    key, holder = _key(entry["loc"], raw)
    kind, context, value = entry["type"], entry.get("ctx", {}), entry["input"]
    place = f"{path}: {key}" if key else f"{path}"
    if kind == "union_tag_invalid":
        value = context["tag"]
    if kind == "missing":
        return f"{place}: is required"
    if kind == "extra_forbidden":
        return f"{place}: unknown key{nearest(key.rsplit('.', 1)[-1], _siblings(entry['loc'], model, holder))}"
    if kind == "value_error":
        return f"{place}: {context['error']}" + ("" if "got " in str(context["error"]) else f", got {shown(value)}")
    return f"{place}: {_rule(kind, context, entry['msg'])}, got {shown(value)}{_mend(kind, context, value)}"


def _mend(kind: str, context: Mapping[str, Any], value: Any) -> str:
    """What the value was likely meant to be, to stand behind the fault, or nothing."""
    if not isinstance(value, str):
        return ""
    choices = context.get("expected_tags") or context.get("expected") or ""  # as "'patch', 'array'"
    return decimals(value) if kind == "float_type" else nearest(value, re.findall(r"'([^']+)'", choices))


def _rule(kind: str, context: Mapping[str, Any], message: str) -> str:
    rules = {
        "greater_than": "must be above {gt:g}",
        "greater_than_equal": "must be at least {ge:g}",
        "less_than": "must be below {lt:g}",
        "less_than_equal": "must be at most {le:g}",
        "float_type": "must be a number",
        "finite_number": "must be a finite number",
        "int_type": "must be a whole number",
        "string_type": "must be text in quotes",
        "bool_type": "must be true or false",
        "tuple_type": "must be a list in brackets",
        "model_type": "must be a table",
        "literal_error": "must be one of {expected}",
        "union_tag_invalid": "kind must be one of {expected_tags}",
        "union_tag_not_found": "needs a kind",
        "timezone_aware": "must carry a time zone (append Z for UTC)",
        "datetime_type": "must be a date and time without quotes, such as 2026-12-07T00:00:00Z",
        "time_type": "must be a time of day without quotes, such as 06:30:00",
        "too_short": "must have {min_length} or more entries",
        "too_long": "must have at most {max_length} entries",
        "missing_argument": "is required",
    }
    return rules[kind].format(**context) if kind in rules else message[0].lower() + message[1:]


def _key(location: tuple, raw: Any) -> tuple[str, Any]:
    """The dotted key as the user wrote it (list entries from 1, with their name), and the table that holds it."""
    key, holder = "", raw
    for part in location:
        if isinstance(part, int) and isinstance(raw, tuple):
            holder, raw = raw, raw[part] if part < len(raw) else None
            label = next((raw[k] for k in ("name", "mode") if k in raw), "") if isinstance(raw, dict) else ""
            key += f"[{part + 1}]" + (f' "{label}"' if isinstance(label, str) and label.isprintable() and label else "")
        elif isinstance(raw, dict) and isinstance(part, str):
            if part not in raw and any(part == value for value in raw.values() if isinstance(value, str)):
                continue  # the tag of a union is no key of the file
            holder, raw = raw, raw.get(part)
            key += ("." if key else "") + (part if part.isprintable() else shown(part))
    return key, holder


def _siblings(location: tuple, model: type | None, holder: Any) -> set[str]:
    """Keys that the table at `location` may hold."""
    fields = getattr(model, "model_fields", {})
    for part in location[:-1]:
        if isinstance(part, str) and part in fields:
            fields = _fields_within(fields[part].annotation)
    return set(fields) - set(holder or ())


def _fields_within(annotation: Any) -> dict:
    if hasattr(annotation, "model_fields"):
        return annotation.model_fields
    found: dict = {}
    for argument in getattr(annotation, "__args__", ()):
        found |= _fields_within(argument)
    return found


def _with_tuples(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _with_tuples(entry) for key, entry in value.items()}
    return tuple(_with_tuples(entry) for entry in value) if isinstance(value, list) else value


def _nearest_file(path: Path) -> str:
    try:
        return nearest(path.name, (entry.name for entry in path.parent.iterdir()))
    except (OSError, ValueError):
        return ""
