"""The card: an effect's description of itself."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Final, Literal

from clockfall.binary.ranges import ANY, Range
from clockfall.binary.state import DERIVED, FIELDS
from clockfall.errors import OutOfRange

Nature = Literal["intrinsic", "apparent"]

INTRINSIC: Final = "intrinsic"
"""The orbit itself changes."""

APPARENT: Final = "apparent"
"""The orbit changes only as we see it."""

_EFFECT_NAME = re.compile(r"[a-z][a-z0-9]*(-[a-z0-9]+)*")
_PARAMETER_NAME = re.compile(r"[a-z][a-z0-9]*(_[a-z0-9]+)*")


@dataclass(frozen=True, slots=True)
class Rate:
    """A state field whose rate of change an effect contributes to.

    Attributes
    ----------
    of : str
        The field, or an own parameter that the effect evolves; its rate is called ``<of>_rate``.
    """

    of: str

    @property
    def name(self) -> str:
        """``<of>_rate``."""
        return f"{self.of}_rate"


@dataclass(frozen=True, slots=True)
class Parameter:
    """A parameter that an effect predicts; a parameter new to clockfall is declared here and nowhere else.

    Attributes
    ----------
    name : str
        Full words joined by underscores.
    unit : str
        The unit in which the effect returns it ("s", "rad/s", "" for a pure number).
    shown_in : str
        The unit in which people read it; "" means `unit`.
    meaning : str
        One line.
    needs : tuple of str
        State fields that this parameter needs beyond those of the card.
    defined_where : str
        The condition under which it has a meaning, in words, as in "sin i <= 1"; "" where it always has one. The
        effect returns NaN where the condition fails; those draws are set aside, counted and reported.
    """

    name: str
    unit: str
    meaning: str
    shown_in: str = ""
    needs: tuple[str, ...] = ()
    defined_where: str = ""


@dataclass(frozen=True, slots=True)
class OwnParameter:
    """A parameter of an effect's own, read from ``[effects.<name>]`` of a system file.

    Attributes
    ----------
    name, unit, meaning : str
        The effect finds the value in `settings[name]`, in `unit`, broadcast to the state's batch.
    default : float or None
        None: the effect is idle until the user gives a value.
    default_uncertainty : float
        Standard uncertainty of the default, which is drawn with the rest.
    within : Range
        Where it has a meaning, in `unit`.
    evolves : bool
        The effect may return a rate of it.
    """

    name: str
    unit: str
    meaning: str
    default: float | None = None
    default_uncertainty: float = 0.0
    within: Range = ANY
    evolves: bool = False


@dataclass(frozen=True, slots=True)
class OwnChoice:
    """A setting of an effect's own that is one of a few words, such as a model; read from ``[effects.<name>]`` too.

    Attributes
    ----------
    name, meaning : str
        The effect finds the word by `settings.choice(name)`.
    words : tuple of str
        What may be chosen; the first is the default.
    """

    name: str
    words: tuple[str, ...]
    meaning: str


@dataclass(frozen=True, slots=True)
class Card:
    """What an effect says of itself.

    Attributes
    ----------
    name : str
        Lower-case words joined by hyphens; the same as the entry point's name.
    summary : str
        One line.
    formula : str
        The formula in ASCII, in the paper's letters.
    sources : tuple of str
        Published sources, each to the equation.
    order : str
        The order kept, and what is dropped.
    valid : str
        The range of validity, in words.
    nature : "intrinsic" or "apparent"
        Whether the orbit changes, or only as we see it.
    needs : tuple of str
        State fields (or derived quantities) without which the effect is idle.
    gives : tuple of Rate or Parameter
        All that the effect may return.
    parameters : tuple of OwnParameter
        The effect's own parameters.
    choices : tuple of OwnChoice
        Its settings that are words.
    replaces : tuple of str
        Effects that step back while this one is active.
    delay : str
        What its delay is, in one line; "" for an effect that has none.

    Raises
    ------
    OutOfRange
        A name that is not well formed, a need that is no field, an unknown nature, no source, or a name given twice.
    """

    name: str
    summary: str
    formula: str
    sources: tuple[str, ...]
    order: str
    valid: str
    needs: tuple[str, ...]
    gives: tuple[Rate | Parameter, ...]
    nature: Nature = INTRINSIC
    parameters: tuple[OwnParameter, ...] = ()
    choices: tuple[OwnChoice, ...] = ()
    replaces: tuple[str, ...] = ()
    delay: str = ""

    def __post_init__(self) -> None:
        self._require(_EFFECT_NAME.fullmatch(self.name), "name", "lower-case words joined by hyphens", self.name)
        self._require(self.nature in (INTRINSIC, APPARENT), "nature", "'intrinsic' or 'apparent'", self.nature)
        self._require(
            self.sources and all(self.sources), "sources", "at least one published source", repr(self.sources)
        )
        for name in (*(p.name for p in self.predicts), *(own.name for own in self.parameters)):
            self._require(_PARAMETER_NAME.fullmatch(name), "gives", "lower_case_words", repr(name))
        evolving = {own.name for own in self.parameters if own.evolves}
        for rate in self.rates:
            self._require(rate.of in FIELDS or rate.of in evolving, "gives", "a state field", repr(rate.of))
        for need in (*self.needs, *(n for p in self.predicts for n in p.needs)):
            self._require(need in FIELDS or need in DERIVED, "needs", "a state field", repr(need))
        names = [item.name for items in (self.gives, self.parameters, self.choices) for item in items]
        twice = sorted({name for name in names if names.count(name) > 1})
        self._require(not twice, "gives", "each name once", ", ".join(twice))

    def _require(self, holds: object, what: str, expected: str, found: str) -> None:
        if not holds:
            raise OutOfRange(f"card of effect {self.name!r}, {what}", expected, found)

    @property
    def rates(self) -> tuple[Rate, ...]:
        """The rates among what the effect gives."""
        return tuple(given for given in self.gives if isinstance(given, Rate))

    @property
    def predicts(self) -> tuple[Parameter, ...]:
        """The predicted parameters among what the effect gives."""
        return tuple(given for given in self.gives if isinstance(given, Parameter))

    def own(self, name: str) -> OwnParameter | None:
        """Return the own parameter called `name`, or None."""
        return next((own for own in self.parameters if own.name == name), None)

    def choice(self, name: str) -> OwnChoice | None:
        """Return the own choice called `name`, or None."""
        return next((choice for choice in self.choices if choice.name == name), None)
