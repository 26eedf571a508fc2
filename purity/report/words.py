"""Words and figures of the printed tables: shop words, chances, contents, bars. No layout."""

from __future__ import annotations

from math import floor, log10

from purity.result import Band, Line, Word

#: What limits a pickup, in shop words; {contact} is the contact that brings or takes most.
HELD_BACK_BY = {
    "ceiling": "{contact}: saturated",
    "melt transfer": "{contact}: melt stirring",
    "gas film": "{contact}: gas film",
    "surface": "{contact}: surface reaction",
    "wetting": "{contact}: not wetted",
    "diffusion": "{contact}: diffusion in the metal",
    "supply": "{contact}: what arrives",
    "inventory": "{contact}: all it holds",
    "film growth": "{contact}: film growth",
    "permeation": "{contact}: through the package",
}

#: Marks an assumed value.
DAGGER = "†"
#: Below this content (ppm) figures are printed in ppb.
PPB_BELOW = 0.1
#: What rounds to 0.10 is still printed in ppm.
_PPB = 0.995 * PPB_BELOW
#: Colour that repeats a word, where colour is wanted.
COLOURS: dict[str, str] = {"over": "red", "closed": "red", "tight": "yellow"}
BAR_CELLS = 6
#: Share of a limit below which a pickup is said to be none that shows.
HARDLY = 2e-3


def figures(value: float, digits: int = 2) -> str:
    """Return a number with so many significant figures, never in powers of ten between 1e-3 and 1e6."""
    if value == 0:
        return "0"
    places = digits - 1 - floor(log10(abs(value)))
    rounded = round(value, places)
    places = digits - 1 - floor(log10(abs(rounded))) if rounded else 0
    return f"{rounded:.{max(places, 0)}f}" if 1e-3 <= abs(rounded) < 1e6 else f"{rounded:.0e}"


def content(ppm: float, digits: int = 2) -> str:
    """Return a content in mass ppm, or in ppb with its unit below 0.1 ppm."""
    if ppm == 0 or abs(ppm) >= _PPB:
        return figures(ppm, digits)
    ppb = 1000 * ppm
    if abs(ppb) < 1e-3:
        return "~0"
    return f"{figures(ppb, digits)} ppb"


def limit(ppm: float | None) -> str:
    """Return a limit as the user gave it: rounding one could hide a content above it."""
    if ppm is None:
        return ""
    return f"{ppm:g}" if ppm == 0 or ppm >= PPB_BELOW else f"{1000 * ppm:g} ppb"


def chance(value: float | None, error: float | None) -> str:
    """Return a chance as "1 in 50", never finer than its sampling error.

    Parameters
    ----------
    value : float or None
    error : float or None
        95 % half width; a chance within it prints as "< 1 in ..." of their sum.
    """
    if value is None:
        return "unknown"
    error = error or 0.0
    if value <= error:
        top = value + error
        return f"< 1 in {_odds(1 / top, down=True)}" if 0 < top < 1 else "unknown"
    if value < 0.15:
        return f"1 in {_odds(1 / value)}"
    if value < 0.95:
        return f"{round(10 * value)} in 10"
    return "> 9 in 10"


def accepted(risk: float) -> str:
    """Return an accepted risk as "1 in 20"."""
    return f"1 in {1 / risk:g}" if risk > 0 else "0"


def _odds(number: float, *, down: bool = False) -> str:
    step = 10 ** max(floor(log10(number)) - 1, 0)
    return str(int((floor if down else round)(number / step) * step))


def bar(spent: float | None, word: Word | None) -> str:
    """Return the share of the allowance spent as six cells that read without colour."""
    if word is None:
        return ""
    if word == "closed":
        return f"[{'x' * BAR_CELLS}]"
    if spent is None or word == "gives off":
        return f"[<{'.' * (BAR_CELLS - 1)}]"
    if spent >= 1:
        return f"[{'#' * BAR_CELLS}>"
    full = max(1, floor(spent * BAR_CELLS))
    return f"[{'#' * full}{'.' * (BAR_CELLS - full)}]"


def limits_it(line: Line) -> str:
    """Return what holds the pickup of an impurity, with the contact that does most of it."""
    if line.held_back_by is None:
        return (line.gap or "") if line.pickup is None else ""
    if line.limit and line.pickup and max(abs(line.pickup.low), abs(line.pickup.high)) < HARDLY * line.limit:
        return "hardly moves"
    main = max(line.contacts, key=lambda part: abs(part.pickup.median), default=None)
    words = HELD_BACK_BY.get(line.held_back_by, f"{{contact}}: {line.held_back_by}")
    return words.format(contact=main.contact if main else "all contacts")


def start(line: Line, *, method: bool) -> str:
    """Return the certified content, "< limit" below detection, with its method where asked."""
    if line.start is None:
        return "none"
    below = line.detection is not None and line.start.high <= line.detection
    text = f"< {content(line.detection or 0.0)}" if below else content(line.start.median)
    return f"{text} ({line.start_method})" if method and line.start_method else text


def ends(line: Line, *, wide: bool) -> tuple[str, str]:
    """Return upper 95 % and median content after the step, as the laboratory would report them.

    Below detection they read together as "< DL (3.0 ppb predicted)", in a narrow table as "< DL (3.0 ppb)"
    with the word below it; of an element that the certificate
    does not name they are the pickup alone, with its sign.
    """
    if line.end is None:
        return _pickup(line.pickup)
    if line.detection is not None and line.end.high < line.detection:
        return "< DL", f"({content(line.end.median)}{' predicted' if wide else ''})"
    return content(line.end.high), content(line.end.median)


def _pickup(band: Band | None) -> tuple[str, str]:
    if band is None:
        return "no data", ""
    return signed(band.high), signed(band.median)


def signed(ppm: float) -> str:
    """Return a pickup with its sign."""
    text = content(ppm)
    return text if ppm < 0 or text in ("0", "~0") else f"+{text}"


def span(band: Band | None) -> str:
    """Return a band as "median (low to high)"."""
    if band is None:
        return ""
    return f"{content(band.median)} ({content(band.low)} to {content(band.high)})"
