"""What can go wrong, by who can mend it; the command line turns each into its exit status."""


class InputError(ValueError):
    """What the user gave is wrong (exit 2). Holds every fault found, each one line naming file, key, value and rule."""

    def __init__(self, *faults: str):
        self.faults = faults
        super().__init__("\n".join(faults))


class NoWeekError(RuntimeError):
    """The question was sound and the answer is no: no safe week exists (exit 1)."""


class MachineError(RuntimeError):
    """The machine could not do it: disk full, folder locked by another run (exit 3)."""
