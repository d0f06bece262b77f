"""What the core says when something is wrong or doubtful."""

from dataclasses import dataclass

__all__ = [
    "ConstructionError",
    "Doubt",
    "FrameError",
    "GeomcoreError",
    "PicksError",
    "SourceError",
    "StudyError",
    "Unsolved",
]


class GeomcoreError(ValueError):
    """A refusal that says what is wrong, where, and what to do about it.

    Parameters
    ----------
    code : str
        Short stable identifier; callers tell errors apart by it, never by class,
        because the core may be loaded under two names.
    reason : str
        What is wrong, as a sentence.
    where : str, optional
        Layer, feature, section or distance the sentence is about.
    remedy : str, optional
        What the user can do.
    """

    def __init__(self, code, reason, where="", remedy=""):
        self.code = code
        self.reason = reason
        self.where = where
        self.remedy = remedy
        lead = f"{where}: " if where else ""
        tail = f" {remedy}" if remedy else ""
        super().__init__(f"{lead}{reason}{tail}")


class FrameError(GeomcoreError):
    """A section line or transport azimuth that cannot be used."""


class SourceError(GeomcoreError):
    """A source declaration, or the values found under it, that cannot be used."""


class PicksError(GeomcoreError):
    """Picks that cannot give a profile or a cut-off."""


class ConstructionError(GeomcoreError):
    """A section on which the construction has no solution."""


class StudyError(GeomcoreError):
    """A study document that does not say what it has to say."""


@dataclass(frozen=True)
class Doubt:
    """A possible but doubtful input: it runs, and the doubt goes on the output.

    Parameters
    ----------
    code : str
        Short stable identifier.
    text : str
        The doubt as a sentence.
    where : str
        Section, layer or distance it is about.
    """

    code: str
    text: str
    where: str = ""

    def __str__(self):
        return f"{self.where}: {self.text}" if self.where else self.text


@dataclass(frozen=True)
class Unsolved:
    """A section that could not be solved; it is falsy and carries the reason.

    Examples
    --------
    >>> bool(Unsolved("S1", "no-fault", "The section does not meet the fault."))
    False
    """

    section_id: str
    code: str
    reason: str

    def __bool__(self):
        return False
