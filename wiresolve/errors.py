"""The exceptions of wiresolve: each knows the exit code of the command line and reads as one line."""

from __future__ import annotations


class WiresolveError(Exception):
    """Base of all errors that wiresolve raises on purpose; `exit_code` is what the command line returns."""

    exit_code = 1


class InputError(WiresolveError, ValueError):
    """A value that a user gave cannot be used.

    Parameters
    ----------
    field : where it stands, as the path of keys ("section.layers[1].thickness") or the argument's name.
    rule : what is wrong, as a rule ("must be positive").
    given : what was given; shown with ``repr`` and shortened.
    remedy : what to write instead.
    """

    exit_code = 2

    def __init__(self, field: str, rule: str, given: object = None, remedy: str = "") -> None:
        self.field, self.rule, self.given, self.remedy = field, rule, given, remedy
        shown = repr(given)
        shown = shown if len(shown) <= 60 else shown[:57] + "..."
        parts = [f"{field}: {rule}" if field else rule]
        if given is not None:
            parts.append(f"got {shown}")
        if remedy:
            parts.append(remedy)
        super().__init__("; ".join(parts).replace("\n", " "))

    def under(self, prefix: str) -> InputError:
        """The same error with `prefix` put before the field's path."""
        field = f"{prefix}.{self.field}" if self.field else prefix
        return type(self)(field, self.rule, self.given, self.remedy)


class MeshError(WiresolveError, RuntimeError):
    """No sound mesh of the section could be made."""

    exit_code = 3


class ConvergenceError(WiresolveError, RuntimeError):
    """An iteration did not converge, or states of the discrete problem could not be accounted for."""

    exit_code = 4


class CoarseMeshError(ConvergenceError):
    """More states hold carriers than are solved: on a finer mesh they may be (`finer_helps`), or there are too many."""

    def __init__(self, finer_helps: bool, count: int) -> None:
        self.finer_helps = finer_helps
        super().__init__(
            f"more than {count} states of one group of valleys hold carriers, too many for subbands:"
            " take a thinner wire, a lower temperature or a voltage that fills it less"
        )
