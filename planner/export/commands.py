"""Whose commands a contact carries up, as rows of its card: as many as the page has room for."""

import numpy as np
import pandas as pd

from planner.export.contacts import clock_text, utc_text
from planner.export.fold import fold


def carried_by(contacts: pd.DataFrame, row) -> list[str]:
    """The contacts whose commands go up in the one of `row` (a named tuple of the table), each with its times."""
    if "commands_from" not in contacts:
        return []
    own = contacts[contacts["commands_from"] == row.contact_id]
    moments = zip(own["contact_id"], utc_text(own["tx_on_utc"]), utc_text(own["tx_off_utc"]), strict=True)
    return [
        f"{name} {pd.Timestamp(on).round('s'):%d %b} {clock_text(on)} to {clock_text(off)}" for name, on, off in moments
    ]


def radio_and_commands(card, named: int) -> list[tuple[str, str]]:
    """The card's `radio` rows, then one for each of its first so many `carried` contacts and one for the rest."""
    rest = len(card.carried) - named
    more = [f"and {rest} more: contacts.csv, commands_from"] if rest > 0 else []
    texts = [*card.carried[:named], *more]
    return [*card.radio, *(("" if n else "Commands to send", text) for n, text in enumerate(texts))]


def named_in(card, page_lines: int, across: int, beside: int) -> int:
    """How many of the `carried` contacts a page of so many lines under the times can name, one at least.

    `across` are the letters of a line from edge to edge, `beside` those of one beside a label.
    """
    whole, short = (*card.cautions, *card.steps, card.footer), (text for _, text in card.radio)
    others = sum(len(fold(text, across)) for text in whole) + sum(len(fold(text, beside)) for text in short)
    ends = others + np.cumsum([len(fold(text, beside)) for text in card.carried], dtype=int)
    if not len(ends) or ends[-1] <= page_lines:
        return len(card.carried)
    return max(int(np.sum(ends < page_lines)), 1)
