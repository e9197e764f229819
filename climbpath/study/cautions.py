"""What is said with every result: the limits of the model and of what may be done with it."""

from __future__ import annotations

CAUTIONS = (
    "The model is of a body on a wall, not of a person.",
    "A predicted gain smaller than the stated interval or step error means nothing.",
    "Pulling and leaping at full effort injures fingers, elbows and shoulders, most of all in "
    "athletes who are still growing.",
    "Try a new sequence on a rope, warmed up, and with a qualified coach.",
    "A layout is inspected, set and approved by qualified people, under the local code and the "
    "wall's own standard.",
)
"""The cautions that go with every result, whatever it says."""

GROWTH_CAUTION = (
    "This athlete may still be growing: lengths change within months, and full-effort pulls and "
    "leaps strain what has not yet hardened."
)
"""For an athlete whose year of birth says that growth may not be over."""

FALSE_START_CAUTION = (
    "The foot leaves the pad less than 0.100 s after the signal: that counts as a false start."
)
"""For a plan or a run whose pad time lies under the limit of the timing rules."""


def cautions_for(*notes: str) -> tuple[str, ...]:
    """The notes that concern this result, in the order given, then the standing cautions.

    ``notes`` are whole sentences: ``GROWTH_CAUTION``, that a body was estimated and not measured,
    that a foot layout was invented. Empty notes and repetitions are left out.
    """
    return tuple(dict.fromkeys(text for text in (*notes, *CAUTIONS) if text.strip()))
