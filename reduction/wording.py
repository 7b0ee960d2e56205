"""The closed words of the results as a reader meets them: statuses, flags, results, inputs, units."""

from __future__ import annotations

import re

from reduction.flags import FLAGS
from reduction.units import UNITS

STATUS = {
    "ok": "measured",
    "excluded": "excluded",
    "not_determined": "not determined",
    "failed": "failed",
    "few_readings": "too few readings",
    "not_converged": "fit did not settle",
    "unstable": "outside the stable region",
    "no_oscillation": "no secular oscillation exists",
    "used": "used",
    "flagged": "flagged and kept",
    "left_out": "left out by the reduction",
}
RESULTS = {
    "charge_to_mass": ("charge-to-mass ratio", "C kg⁻¹"),
    "drag_rate": ("drag rate", "s⁻¹"),
    "diameter": ("diameter", "m"),
    "mass": ("mass", "kg"),
    "charge": ("charge", "C"),
    "surface_charge_density": ("surface charge density", "C m⁻²"),
}
OWN = {
    "balance": "own balance readings",
    "height": "own height readings",
    "secular": "own secular readings",
    "diameter": "own or lot diameter",
}
_KEYS = {
    "finite_reynolds": "finite Reynolds number",
    "field_departure": "departure from the linear field",
    "field_solution": "numerical solution of the field",
}
_LONGEST_FIRST = sorted(UNITS, key=lambda spelling: (-len(spelling), spelling))
_RAISED = {"2": "²", "3": "³"}

CAUTIONS = (
    ("High voltage", "Kilovolts can injure or kill, also from a supply that looks switched off: capacitors keep their "
     "charge. Enclose, interlock, discharge and earth before any hand comes near."),
    ("Laser light", "Laser light can blind, direct or reflected from an electrode. Guard the beam and wear eyewear "
     "made for its wavelength and power."),
    ("Fine powder", "Fine organic powder can burn, explode as a cloud, and be inhaled. Keep amounts small, away from "
     "sparks, and work with extraction or a mask."),
    ("Who decides", "Local rules and qualified staff come first; nothing printed here replaces them."),
)  # fmt: skip


def status_words(word: str) -> str:
    """A status in plain words."""
    return STATUS.get(word, word.replace("_", " "))


def flag_words(flags: str) -> list[str]:
    """The flags of one row in plain words, a sentence each where the list has one."""
    return [FLAGS.get(flag.strip(), flag.strip().replace("_", " ")) for flag in flags.split(";") if flag.strip()]


def unit_words(unit: str) -> str:
    """A unit as it is printed: `V/m` and `V_per_m` give `V m⁻¹`, `1` gives nothing."""
    text = unit.replace("_per_", "/").replace("per_", "1/").replace("degC", "°C").replace("percent", "%")
    above, _, below = text.partition("/")
    above = "" if above == "1" else re.sub(r"([A-Za-z])([23])$", lambda m: m[1] + _RAISED[m[2]], above)
    above = re.sub(r"^u(?=[A-Za-z])", "µ", above)
    if not below:
        return above
    parts = []
    for factor in below.split("/"):
        found = re.fullmatch(r"([A-Za-zµ]+)([23]?)", factor)
        parts.append(f"{found[1]}⁻{_RAISED.get(found[2], '¹')}" if found else factor)
    return " ".join([above, *parts]).strip()


def input_words(name: str) -> tuple[str, str]:
    """What an input is and whose: `trap/ring-a/dc_field_per_volt_per_m` gives `dc field per volt`, `trap ring-a`."""
    scope, _, rest = name.partition("/")
    owner, _, key = rest.partition("/")
    if not key:
        return name.replace("_", " "), ""
    if scope == "particle":
        part = key.rpartition("/")[2] if "/" in key else key
        who = key.partition("/")[0] if "/" in key else ""
        own = f"own readings, part {part}" if part.isdigit() else OWN.get(part, part.replace("_", " "))
        return own, f"particle {who}".strip()
    for spelling in _LONGEST_FIRST:
        if key.endswith("_" + spelling) and len(key) > len(spelling) + 1:
            key = key[: -len(spelling) - 1]
            break
    return _KEYS.get(key, key.replace("_", " ")), f"{scope} {owner}".strip()


def joined(words: list[str]) -> str:
    """A list as one phrase: `a`, `a and b`, `a, b and c`."""
    return words[0] if len(words) == 1 else ", ".join(words[:-1]) + " and " + words[-1] if words else ""


def counted(number: int, one: str, many: str = "") -> str:
    """`1 particle`, `3 particles`."""
    return f"{number} {one if number == 1 else many or one + 's'}"
