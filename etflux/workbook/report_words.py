"""What the results workbook says in words: cautions, reasons, remarks, and the paragraph of the brief."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from etflux.variables import System, flag_bits, flag_words, from_si, quantity, words_of

if TYPE_CHECKING:
    from etflux.results import Results

CAUTIONS = (
    "Planning estimate, not a warning product or an official forecast.",
    "Irrigation decisions: check the field first, and follow local water law and licensed advice.",
    "Days with estimated weather, default parameters or forecasts are marked; they may still move.",
)
# What the other worlds are, wherever they are shown.
WORLD_SENTENCES = {
    "crops": "Rest's cover on every stand: the same days if every stand grew what covers the rest of its county; what "
    "this world has more is the effect of the crops.",
    "evaporation": "No evaporation: the same days if no water had left the ground anywhere in the region.",
}
BAND_NOTE = "Ranges and bands cover the parameters that were varied, not the error of the method."
# Flags that leave no number to print.
BLANKING = ("saturated", "energy_short", "tags_above_humidity")
NOT_COMPUTED = "the air was not computed"

_NOT_XML = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ufffe\uffff\ud800-\udfff]")  # a workbook cannot hold them
_LONGEST = 32000

# A depth of irrigation is not known to better than 0.05 in, so none is printed finer: 0.05 in, or 2 mm.
NEED_STEP: dict[System, float] = {"us": 0.05, "si": 2.0}


def clean_text(text: Any) -> str:
    """Text that a workbook can hold: no control characters, not too long; blank for None and NaN.

    Examples
    --------
    >>> clean_text("Corn\\x00"), clean_text(None)
    ('Corn', '')
    """
    if text is None or text != text:
        return ""
    return _NOT_XML.sub("", str(text))[:_LONGEST]


def shown(name: str, value: float, system: System, unit: bool = True, decimals: int | None = None) -> str:
    """A value with its unit, as people read it; a dash where there is none.

    Examples
    --------
    >>> shown("contribution_c", 2.6, "us"), shown("contribution_c", 2.6, "si", unit=False)
    ('4.7 °F', '2.6')
    """
    if not np.isfinite(value):
        return "–"
    row = quantity(name)
    places = row.decimals_in(system) if decimals is None else decimals
    people = from_si(value, name, system).item()
    if abs(people) >= 10_000.0:
        people = float(f"{people:.3e}")  # four digits are all that such a sum is known to
    number = f"{people:,.{places}f}"
    return f"{number} {row.unit_in(system)}".rstrip() if unit else number


def each(bits: ArrayLike, registry: str) -> np.ndarray:
    """Words of every value of an array of bits, one text each."""
    numbers = np.asarray(bits, dtype=np.int64)
    found, place = np.unique(numbers, return_inverse=True)
    texts = np.array(["; ".join(words_of(int(value), registry)) for value in found], dtype=object)
    return texts[place.reshape(-1)].reshape(numbers.shape)


def marked_words(estimated_pct: ArrayLike, provisional: ArrayLike) -> np.ndarray:
    """Why a day is marked: the share of its weather that was estimated, and what may still move it.

    Parameters
    ----------
    estimated_pct, provisional : array_like, one shape
        Share of the day's input that was not measured. [%]; bits of the registry [provisional].

    Returns
    -------
    ndarray of str
        Blank for a day that rests on measurements and will not move.
    """
    share = np.nan_to_num(np.round(np.asarray(estimated_pct, float))).astype(np.int64)
    bits = np.asarray(provisional, np.int64)
    found, place = np.unique(share * 256 + bits, return_inverse=True)
    weather = flag_bits("provisional")["weather"]
    texts = []
    for key in found:
        percent, why = divmod(int(key), 256)
        parts = [f"{percent} % of the weather estimated"] if percent else []
        texts.append("; ".join(parts + words_of(why & ~weather if percent else why, "provisional")))
    return np.array(texts, dtype=object)[place.reshape(-1)].reshape(share.shape)


def missing_reason(flags: ArrayLike, value: ArrayLike) -> np.ndarray:
    """Why a county has no contribution, in words; blank where it has one."""
    blanking = sum(flag_bits("air")[name] for name in BLANKING)
    texts = each(np.asarray(flags, np.int64) & blanking, "air")
    missing = np.isnan(np.asarray(value, float))
    return np.where(missing, np.where(texts == "", NOT_COMPUTED, texts), "")


def remark_letters(flags: np.ndarray, provisional: np.ndarray) -> tuple[list[str], list[str]]:
    """Letters for each county's remarks, and the legend that spells them out.

    Returns
    -------
    letters : list of str
        One text per county: "a, c".
    legend : list of str
        One line per letter that occurs, in order.
    """
    known = [
        (registry, bit, words) for registry in ("air", "provisional") for bit, words in flag_words(registry).items()
    ]
    columns = {"air": flags.astype(np.int64), "provisional": provisional.astype(np.int64)}
    used = [row for row in known if row[1] and (columns[row[0]] & row[1]).any()]
    letter = {row[:2]: chr(ord("a") + position) for position, row in enumerate(used)}
    letters = [
        ", ".join(mark for (registry, bit), mark in letter.items() if int(columns[registry][county]) & bit)
        for county in range(len(flags))
    ]
    return letters, [f"{letter[row[:2]]}: {row[2]}" for row in used]


def day_words(day: Any) -> str:
    """A date as people write it.

    Examples
    --------
    >>> day_words(np.datetime64("2031-07-26"))
    '26 July 2031'
    """
    import datetime as dt

    date = dt.date.fromisoformat(str(day)[:10])
    return f"{date.day} {date:%B %Y}"


def paragraph(results: Results, numbers: dict[str, Any], system: System) -> str:
    """The day in plain sentences, to paste into a discussion."""

    def of(name: str) -> str:
        return shown(name, numbers[name], system)

    area = shown("area_km2", numbers["county_area_km2"], system, decimals=0)
    counties = _count(numbers["counties"], "county", "counties")
    text = (
        f"On {day_words(numbers['day'])} the ground of the region ({counties}, {area}) gave {of('et_county_mm')} of "
        f"water to the air, a latent flux of {of('le_county_w_m2')} as the mean of the day and "
        f"{of('le_daytime_w_m2')} between sunrise and sunset; reference ET was {of('eto_mm')}."
    )
    return " ".join([text, *_air_sentences(results, numbers, system), *_stand_sentences(numbers)])


def _air_sentences(results: Results, numbers: dict[str, Any], system: System) -> list[str]:
    found = numbers["contribution"]
    if not found["counties"]:
        return [f"There is no number for the dew point: {NOT_COMPUTED}, or has no valid mixing depth."]

    def rise(value: float) -> str:
        return shown("contribution_c", value, system)

    sentence = f"The crops' water added {rise(numbers['contribution_c'])} to the afternoon dew point"
    if found["ranked"] > 1:
        sentence += f" ({rise(found['least_c'])} to {rise(found['most_c'])} in {found['ranked']} ranked counties)"
    if np.isfinite(numbers["contribution_carried_c"]):
        sentence += f": {rise(numbers['contribution_same_day_c'])} from today's water and "
        sentence += f"{rise(numbers['contribution_carried_c'])} carried over from earlier days"
    sentences = [sentence + "."]
    covers = [row for row in numbers["covers"] if row["contribution_c"] > 0.0]
    if len(covers) > 1:
        largest = max(covers, key=lambda row: row["contribution_c"])
        sentences.append(f"Most of it came from {largest['tag']} ({rise(largest['contribution_c'])}).")
    if np.isfinite(numbers["effect_of_crops_c"]):
        sentences.append(
            f"Had every stand grown what covers the rest of its county, the afternoon dew point would be "
            f"{rise(abs(numbers['effect_of_crops_c']))} {'lower' if numbers['effect_of_crops_c'] >= 0.0 else 'higher'}."
        )
    if np.isfinite(numbers["contribution_p10_c"]):
        sentences.append(
            f"Of {results.settings['air_draws']} random draws eight in ten lie between "
            f"{rise(numbers['contribution_p10_c'])} and {rise(numbers['contribution_p90_c'])}. {BAND_NOTE}"
        )
    sentences += _convective_sentences(results, numbers)
    sure = numbers["marked"]["confidence"]
    parts = [f"{count} {word}" for word, count in sure.items() if count]
    if parts:
        sentences.append(f"How sure, by county: {', '.join(parts)}.")
    return sentences


def _convective_sentences(results: Results, numbers: dict[str, Any]) -> list[str]:
    """Two sentences on convective energy, where the run computed it for the day."""
    county = results.county.sel(date=np.datetime64(numbers["day"]))
    names = [name for name in county.data_vars if str(name).endswith("_j_kg")]
    if not names or not np.isfinite(county[names[0]].to_numpy()).any():
        return []
    from etflux import convection

    return list(convection.sentences(convection.summary({str(name): county[name].to_numpy() for name in names})))


def _stand_sentences(numbers: dict[str, Any]) -> list[str]:
    stands = numbers["stands"]
    if not stands["count"]:
        return []
    share = f"{stands['stressed_area_pct']:.0f} % of their area"
    whole = _count(stands["count"], "stand", "stands")
    verb = "is" if stands["stressed"] == 1 else "are"
    short = f"{stands['stressed']} of {whole} ({share}) {verb} short of water."
    sentences = [short if stands["stressed"] else f"None of {whole} is short of water."]
    if stands["need"]:
        verb = "has" if stands["need"] == 1 else "have"
        sentences.append(f"{_count(stands['need'], 'stand', 'stands')} {verb} an irrigation need.")
    return sentences


def _count(number: int, one: str, many: str) -> str:
    return f"{number} {one if number == 1 else many}"


def input_name(results: Results) -> str:
    """File name of the input, without the folders it lay in."""
    return clean_text(str(results.source.get("path", "")).replace("\\", "/").rsplit("/", 1)[-1])


def identity_line(results: Results) -> str:
    """Which run this is: id, time, input."""
    source = input_name(results) or "no file"
    start = str(results.source.get("sha256", ""))[:12]
    hashed = f" (sha256 {start}…)" if start else ""
    issued = results.issued.strftime("%Y-%m-%d %H:%M %Z").strip()
    return f"Run {results.run_id}, issued {issued}, input {clean_text(source)}{hashed}, etflux {results.version}"
