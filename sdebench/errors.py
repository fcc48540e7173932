"""What can go wrong in using the bench: each class takes the facts and writes the sentence.

A scientific outcome is never an exception. Everything here is a wrong use or a bad input and ends
a command with exit code 2, but for `BenchFault`, which says that the bench contradicts itself and
ends it with 4, and `RefutedEvidence`, which was to be accepted as if it were not, with 1.
"""

import traceback
from collections.abc import Iterable, Sequence
from difflib import get_close_matches


class SdebenchError(Exception):
    """A mistake in what the bench was given; its text is the whole message for the user."""

    exit_code = 2


class BenchFault(SdebenchError):
    """Two sources inside the bench disagree beyond chance; never blamed on the user."""

    exit_code = 4


class UnknownName(SdebenchError):
    """A scheme, problem, parameter or functional that does not exist."""

    def __init__(self, kind: str, name: str, known: Iterable[str], hint: str = "") -> None:
        names = sorted(known)
        near = get_close_matches(name, names, n=1, cutoff=0.5)
        guess = f" Did you mean '{near[0]}'?" if near else ""
        listing = hint or (f" Known: {', '.join(names)}." if names else "")
        super().__init__(f"No {kind} named '{name}'.{guess}{listing}")


class DuplicateName(SdebenchError):
    """Two things of one kind claim the same name."""

    def __init__(self, kind: str, name: str, places: Sequence[str]) -> None:
        super().__init__(
            f"Two {kind}s are named '{name}' ({' and '.join(places)}): "
            "names are unique; rename one, for instance with name='...'."
        )


class BadParameter(SdebenchError):
    """A parameter of a problem that is missing, not a number, or outside its domain."""

    def __init__(self, problem: str, name: str, value: object, rule: str) -> None:
        super().__init__(f"{problem}: {name} = {value!s} cannot be used: {rule}.")


class BadClaim(SdebenchError):
    """A claim that is not a usable order."""

    def __init__(self, scheme: str, claim: str, value: object, rule: str) -> None:
        super().__init__(f"Scheme '{scheme}' claims {claim}={value!r}: {rule}.")


class BadStep(SdebenchError):
    """A function that cannot be a step, told before it is called."""

    def __init__(self, name: str, why: str) -> None:
        super().__init__(f"'{name}' {why}: a step is f(sde, t, x, h, noise) and returns the new x.")


class BadPath(SdebenchError):
    """An integrator of whole paths that returns no end states."""

    def __init__(self, name: str, seen: str) -> None:
        super().__init__(
            f"'{name}' returns {seen} from a whole path, where an array of shape (paths,) of "
            "float64 belongs: return the states after the last step alone."
        )


class BadFunctional(SdebenchError):
    """A functional whose values cannot be averaged."""

    def __init__(self, name: str, why: str) -> None:
        super().__init__(
            f"Functional '{name}' {why}: it takes an array of end points, leaves it as it is, and "
            "returns an array of finite numbers of the same shape."
        )


class BadOption(SdebenchError):
    """An option of a study whose value cannot be used."""

    def __init__(self, option: str, value: object, rule: str) -> None:
        super().__init__(f"{option} = {value!s} cannot be used: {rule}.")


class UndeclaredFunctional(SdebenchError, AttributeError):
    """A step reads a Wiener functional that its scheme did not ask for."""

    def __init__(self, name: str, given: Sequence[str]) -> None:
        wanted = ", ".join(f'"{n}"' for n in (*given, name))
        super().__init__(
            f"The step reads noise.{name}, but its scheme declares only {', '.join(given)}: "
            f"write @scheme(..., noise=({wanted}))."
        )


class UserFileError(SdebenchError):
    """A user's file that is missing, does not parse, fails to load, or lacks what was named."""


class UserCodeRaised(SdebenchError):
    """A step, a functional or a file of the user's that raised, with the user's own frames."""

    def __init__(
        self,
        name: str,
        where: str,
        cause: BaseException,
        frames: Sequence[traceback.FrameSummary],
    ) -> None:
        shown = "".join(traceback.format_list(list(frames)))
        said = f": {cause}" if str(cause) else ""
        super().__init__(f"{name} raised {type(cause).__name__} {where}{said}\n{shown}".rstrip())


class ForeignFailed(SdebenchError):
    """An integrator of another language that failed, with the last lines of its standard error."""

    def __init__(self, name: str, what: str, lines: Sequence[str] = ()) -> None:
        said = f"; its last lines of standard error:\n{chr(10).join(lines)}" if lines else "."
        super().__init__(f"'{name}' {what}{said}")


class NothingSuits(SdebenchError):
    """A scheme that no problem of the bench has everything for."""

    def __init__(self, scheme: str, needed: Sequence[str]) -> None:
        super().__init__(
            f"No problem has all that {scheme} steps by: {', '.join(needed)}. `sdebench catalogue` "
            "lists the functionals and parameters of each."
        )


class BadEvidenceFile(SdebenchError):
    """An evidence file that cannot be read back."""

    def __init__(self, path: str, why: str) -> None:
        super().__init__(f"'{path}' is not a readable evidence file: {why}.")


class BadBaseline(SdebenchError):
    """A baseline that cannot be read, or that this project was not measured as."""

    def __init__(self, path: str, why: str) -> None:
        super().__init__(f"'{path}' is no baseline to hold anything against: {why}.")


class RefutedEvidence(SdebenchError):
    """Evidence that was to be accepted as a baseline though it refutes a claim."""

    exit_code = 1

    def __init__(self, claims: Sequence[str]) -> None:
        super().__init__(
            f"Not accepted: {'; '.join(claims)} refuted. Mend it, lower the claim, or say "
            "--refuted-too; the baseline stays as it was."
        )


class BadProject(SdebenchError):
    """A table of what to guard that cannot be used; the sentence names the key's path."""

    def __init__(self, path: str, why: str) -> None:
        super().__init__(f"'{path}': {why}.")


class NoProject(BadProject):
    """There is no table of what to guard, at a place or above it."""


class BadHistory(SdebenchError):
    """A history file that cannot be read or appended to."""

    def __init__(self, path: str, why: str) -> None:
        super().__init__(f"'{path}' cannot be used as a history: {why}.")


class CannotWrite(SdebenchError):
    """A file that cannot be written; for evidence, found out before anything is measured."""

    def __init__(self, path: str, why: str) -> None:
        super().__init__(f"Cannot write '{path}': {why}. Name a place that you may write to.")
