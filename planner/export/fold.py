"""Text cut into lines of a page, wide letters counted as two."""

import unicodedata


def width(text: str) -> int:
    """Letters across, where East Asian wide and full-width ones (Unicode Annex 11) take the room of two."""
    return sum(2 if unicodedata.east_asian_width(letter) in "WF" else 1 for letter in text)


def fold(text: str, letters: int, hanging: str = "") -> list[str]:
    """Lines of at most `letters` across, broken at spaces and, in longer words, anywhere; later lines begin `hanging`.

    No-break spaces hold; at least one line, and at least one letter a line.
    """
    lines, line = [], ""
    for word in (word for word in text.split(" ") if word):
        while word:
            joined = f"{line} {word}" if line.strip() else line + word
            if width(joined) <= letters:
                line, word = joined, ""
            elif line.strip():
                lines.append(line)
                line = hanging
            else:
                cut = _fitting(word, letters - width(line))
                lines.append(line + word[:cut])
                line, word = hanging, word[cut:]
    return [*lines, line] if line.strip() or not lines else lines


def shortened(text: str, letters: int) -> str:
    """The text, or as much of it as fits with an ellipsis into `letters`, 3 or more."""
    return text if width(text) <= letters else text[: _fitting(text, letters - 1)] + "…"


def _fitting(text: str, letters: int) -> int:
    """How many letters of the text fit, one at least."""
    count = 0
    while count < len(text) and width(text[: count + 1]) <= letters:
        count += 1
    return max(count, 1)
