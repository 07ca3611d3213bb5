"""What can go wrong, by who can mend it; the command line turns each into its exit status."""

MOST_TOLD, LONGEST_TOLD = 50, 1000  # faults; characters of one


class InputError(ValueError):
    """What the user gave is wrong (exit 2). Holds every fault found, each naming file, key, value and rule.

    Beyond fifty faults only their number is told; what a terminal could not print is escaped.
    """

    def __init__(self, *faults: str):
        if len(faults) > MOST_TOLD + 1:  # one more may be the number itself, told on from another file's error
            faults = (*faults[:MOST_TOLD], f"and {len(faults) - MOST_TOLD} more faults")
        self.faults = tuple(map(_printable, faults))
        super().__init__("\n".join(self.faults))


def _printable(fault: str) -> str:
    shown = fault if len(fault) <= LONGEST_TOLD else fault[:LONGEST_TOLD] + "…"
    if shown.replace("\n", "").isprintable():
        return shown
    return "".join(c if c.isprintable() or c == "\n" else c.encode("unicode_escape").decode() for c in shown)


class NoWeekError(RuntimeError):
    """The question was sound and the answer is no: no safe week exists (exit 1)."""


class MachineError(RuntimeError):
    """The machine could not do it: disk full, folder locked by another run (exit 3)."""
