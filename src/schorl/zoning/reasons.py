"""The sentence that says why there are so many zones, or one flat rate."""

from __future__ import annotations

from schorl.zoning.zone_count import GATE_SAVING

#: Below this number of samples a missing pattern is no evidence of a uniform field.
FEW_SAMPLES = 40
WORDS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")


def number_word(count: int) -> str:
    """A number as a word up to ten."""
    return WORDS[count] if 0 <= count < len(WORDS) else str(count)


def percent(share: float) -> str:
    """A share in whole percent."""
    return f"{100.0 * share:.0f} %"


def between(low: float, high: float) -> str:
    """A range of savings; below nothing it says so."""
    if low < 0:
        return f"between a loss of {percent(-low)} and a saving of {percent(high)}"
    return f"between {percent(low)} and {percent(high)}"


def flat_reason(*, p: float, differs: bool, best: float, samples: int, test: str) -> str:
    """Why one flat rate: no pattern in need and soil, or nothing gained."""
    if not differs:
        sentence = (
            f"One flat rate: boron need and soil at the {samples} samples show no {test} that "
            f"chance would not show as well (p = {p:.3f})."
        )
        if samples < FEW_SAMPLES:
            sentence += (
                f" {samples} samples are few: this is no evidence that the field is uniform, only "
                "that zones cannot be told from them."
            )
        return sentence
    return (
        f"One flat rate: after all limits and machine steps the best zones would save "
        f"{percent(max(best, 0.0))} of the expected loss; below {percent(GATE_SAVING)} zones are "
        "not worth their risk."
    )


def cluster_reason(
    count: int,
    *,
    p: float,
    saving: float,
    low: float,
    high: float,
    classes: int | None,
) -> str:
    """Why so many zones: classes in the samples, or slices of a gradient that save enough."""
    return (
        f"{number_word(count).capitalize()} zones: need and soil are patterned (p = {p:.3f}), "
        f"zones save {percent(saving)} of the loss of one flat rate ({between(low, high)}), "
        f"and {_kind(count, classes)}."
    )


def _kind(count: int, classes: int | None) -> str:
    """What the zones are, by the classes that the samples fall into."""
    if classes is None:
        return "there are too few complete samples to look for discrete classes in them"
    if classes == 1:
        return "the soil changes gradually, so the zones are slices of a gradient"
    fall = f"the samples fall into {number_word(classes)} discrete classes"
    if classes == count:
        return fall
    return f"{fall}, of which this number of zones is worth a rate each"


def own_count_reason(count: int, *, p: float | None, saving: float, low: float, high: float) -> str:
    """The advisor's own number, with what speaks for it."""
    if count == 1:
        return "One flat rate, as asked for."
    shown = "" if p is None else f"; pattern of need and soil: p = {p:.3f}"
    return (
        f"{number_word(count).capitalize()} zones, as asked for: expected saving against one flat "
        f"rate {percent(saving)} ({between(low, high)}){shown}."
    )


def sampled_reason(count: int, *, p: float, saving: float) -> str:
    """Sample zones are the management zones."""
    return (
        f"{number_word(count).capitalize()} zones as they were sampled: their needs differ by more "
        f"than laboratory and sampling error explain (p = {p:.3f}), and a rate each saves "
        f"{percent(saving)} of the loss of one flat rate."
    )


def given_reason(count: int, origin: str, *, saving: float) -> str:
    """Zones that came from outside: an earlier pack or the advisor's layer."""
    whose = "kept from the earlier pack" if origin == "kept" else "of the advisor's own layer"
    return (
        f"{number_word(count).capitalize()} zones {whose}, with new rates: expected saving against "
        f"one flat rate {percent(saving)}."
    )
