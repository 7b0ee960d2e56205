"""A seed makes a mutation: which file of the sample is written otherwise, and what must come of it."""

from __future__ import annotations

import random
import re
from collections.abc import Callable
from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path

import hostile
import yaml
from oddnumbers import drawn, meaning, shorthand
from oddtexts import PIECES
from sample import LOGS, Sample, csv_name, dialect, localised, rendered

# Column and where it stands in the checked table, with SI over unit as a fraction.
NUMBERS = {
    "time_s": ("time", 1, 1),
    "drive_voltage_peak_V": ("drive_amplitude", 1, 1),
    "drive_frequency_Hz": ("drive_frequency", 1, 1),
    "balance_voltage_V": ("balance_voltage", 1, 1),
    "dc_voltage_V": ("dc_voltage", 1, 1),
    "secular_frequency_Hz": ("secular_frequency", 1, 1),
    "height_mm": ("height", 1, 1000),
}
_NOTHING = ("", "~", "null")  # after a key
REQUIRED = frozenset(NUMBERS) - {"time_s"}
# Key, file it stands in, where it arrives, SI over unit.
QUANTITIES = {
    "dc_field_per_volt_per_m": ("traps", lambda c: c.traps, "dc_field_per_volt", 1, 1),
    "ac_gradient_per_volt_per_m2": ("traps", lambda c: c.traps, "ac_gradient_per_volt", 1, 1),
    "stray_field_V_per_m": ("traps", lambda c: c.traps, "stray_field", 1, 1),
    "shape_factor": ("species", lambda c: c.species, "shape_factor", 1, 1),
    "diameter_um": ("species", lambda c: c.species, "diameter", 1, 1_000_000),
    "density_kg_per_m3": ("species", lambda c: c.species, "density", 1, 1),
}


@dataclass(frozen=True)
class Expected:
    """What must come of a mutation: `same` numbers, a `cell` or `key` of a given value, or `anything` safe."""

    kind: str
    about: str
    place: tuple[str, ...] = ()  # log, field, row; or key
    value: tuple[Decimal, Decimal] | None = None  # SI value and u written; None where nothing but a refusal is right
    blank: bool = False  # nothing is written, which an optional place allows


Mutation = Callable[[random.Random, Sample, Path], Expected]


def mutate(seed: int, sample: Sample, folder: Path) -> Expected:
    """Write the sample into a new folder and mutate it."""
    chance = random.Random(seed)
    sample.write(folder)
    mutation = chance.choices([same, cell, key, damage, *hostile.ALL], [20, 14, 12, 20, *hostile.WEIGHTS])[0]
    found = mutation(chance, sample, folder)
    return found if isinstance(found, Expected) else Expected("anything", f"{mutation.__name__}: {found}")


def same(chance: random.Random, sample: Sample, folder: Path) -> Expected:
    """Write any of the files in another way that means the same."""
    done = []
    for log in (*LOGS, "particles", "lost"):
        if chance.random() < 0.6:
            done.append(f"{log} {_same_csv(chance, sample, folder, log)}")
    for name in sorted(sample.files):
        if name.endswith(".yaml") and chance.random() < 0.5:
            done.append(f"{name} {_same_yaml(chance, sample, folder / name)}")
    return Expected("same", "; ".join(done))


_HEADS = {
    "time_s": ("time_s", "time [s]", "time/s", "time (s)", "time_ms"),
    "drive_voltage_peak_V": ("drive_voltage_peak_V", "drive_voltage_peak [V]", "drive_voltage_peak/V",
                             "drive_voltage_peak_kV"),
    "drive_frequency_Hz": ("drive_frequency_Hz", "drive_frequency [Hz]", "drive_frequency_kHz"),
    "balance_voltage_V": ("balance_voltage_V", "balance_voltage (V)", "balance_voltage_mV"),
    "dc_voltage_V": ("dc_voltage_V", "dc_voltage/V", "dc_voltage_kV"),
    "secular_frequency_Hz": ("secular_frequency_Hz", "secular_frequency [Hz]", "secular_frequency_mHz"),
    "height_mm": ("height_mm", "height [mm]", "height/mm", "height_um", "height [µm]", "height_m"),
}  # fmt: skip
_SHIFT = {"ms": 3, "kV": -3, "kHz": -3, "mV": 3, "mHz": 3, "um": 3, "µm": 3, "m": -3}


def _spelled(chance: random.Random, head: str) -> tuple[str, int]:
    """Another head for a column, and by how many powers of ten its numbers are written larger."""
    new = chance.choice(_HEADS[head])
    unit = re.split(r"[_ /\[(]", new.rstrip("])"))[-1]
    own = head.rpartition("_")[2]
    return new, 0 if unit == own else _SHIFT[unit]


def _rewritten(chance: random.Random, text: str, power: int) -> str:
    """The same decimal number in another spelling."""
    number = Decimal(text).scaleb(power)
    plain = f"{number:f}"
    way = chance.randrange(6)
    if way == 0:
        return f"{number:e}"
    if way == 1 and "." in plain:
        return plain + "00"
    if way == 2 and number > 0:
        return "+" + plain
    if way == 3 and number < 0:
        return plain.replace("-", "\N{MINUS SIGN}")
    if way == 4 and plain.lstrip("-").startswith("0."):
        return plain.replace("0.", ".", 1)
    return plain


def _same_csv(chance: random.Random, sample: Sample, folder: Path, log: str) -> str:
    heads, rows = sample.table(log)
    how = dialect(chance)
    rows = [list(row) for row in rows]
    for at, head in enumerate(heads):
        if head in _HEADS:
            heads[at], power = _spelled(chance, head)
            for row in rows:
                row[at] = localised(_rewritten(chance, row[at], power), how.mark)
    if chance.random() < 0.4:
        heads = [*heads, "remark of our own"]
        rows = [[*row, chance.choice(["", "ok", "Gerät 3", "# no comment", "a\nb"])] for row in rows]
    if chance.random() < 0.5:
        order = list(range(len(heads)))
        chance.shuffle(order)
        heads, rows = [heads[k] for k in order], [[row[k] for k in order] for row in rows]
    if chance.random() < 0.4:
        chance.shuffle(rows)
    text = rendered(heads, rows, how)
    if chance.random() < 0.4:  # lines between rows; a cell may span lines, so only where none does
        lines = text.split(how.end)
        for _ in range(3 if '"' not in text else 0):
            lines.insert(chance.randrange(len(lines)), chance.choice(["", "# a comment; 1,5", "   ", "#"]))
        text = how.end.join(lines)
    if chance.random() < 0.2 and how.separator != "\t":
        text = f"sep={how.separator}{how.end}" + text
    if chance.random() < 0.3:
        text = text.removesuffix(how.end)
    encoding = chance.choice(["utf-8", "utf-8", "utf-8-sig", "utf-16"])
    (folder / csv_name(log)).write_bytes(text.encode(encoding))
    return f"{how} {encoding}"


def _same_yaml(chance: random.Random, sample: Sample, path: Path) -> str:
    text = path.read_text("utf-8")
    content = yaml.BaseLoader(text).get_single_data()  # makes nothing but texts
    if chance.random() < 0.6:
        items = list(content.items())
        chance.shuffle(items)
        style = chance.choice([None, '"', "'"])
        flow = chance.choice([True, False, None])
        text = yaml.safe_dump(
            dict(items), default_style=style, default_flow_style=flow, sort_keys=chance.random() < 0.5
        )
    if chance.random() < 0.4:
        text = "# a comment: 1\n\n---\n" + text + "...\n"
    if chance.random() < 0.4:
        text = text.replace("\n", "\r\n")
    encoding = chance.choice(["utf-8", "utf-8-sig", "utf-16"])
    path.write_bytes(text.encode(encoding))
    return encoding


def cell(chance: random.Random, sample: Sample, folder: Path) -> Expected:
    """Put another text into one cell of numbers."""
    log = chance.choice(LOGS)
    heads, rows = sample.table(log)
    how = dialect(chance)
    head = chance.choice([head for head in heads if head in NUMBERS])
    at, row = heads.index(head), chance.randrange(len(rows))
    rows = [[localised(one, how.mark) for one in cells] for cells in rows]
    text = drawn(chance)
    if chance.random() < 0.5:
        text = localised(text, how.mark)
    rows[row][at] = text
    (folder / csv_name(log)).write_bytes(rendered(heads, rows, how).encode())
    name, above, below = NUMBERS[head]
    number = meaning(text, how.mark)
    value = None if number is None else (number * above / below, Decimal(0))
    blank = not text.strip() and head not in REQUIRED
    return Expected("cell", f"{log} {head} row {row}: {text[:60]!r} in {how}", (log, name, str(row)), value, blank)


def key(chance: random.Random, sample: Sample, folder: Path) -> Expected:
    """Put another text after one key."""
    name = chance.choice(sorted(QUANTITIES))
    file, _, _, above, below = QUANTITIES[name]
    path = folder / sample.named(f"{file}/")
    text = drawn(chance)
    quoted = "'" + text.replace("'", "''") + "'"
    written = quoted if chance.random() < 0.3 and text[:1] not in "'\"{[" else text
    old = path.read_text("utf-8")
    path.write_bytes(re.sub(rf"(?m)^{name}:.*$", lambda _: f"{name}: {written}", old).encode())
    read = shorthand(text)
    value = None if read is None else (read[0] * above / below, read[1] * above / below)
    about = f"{name}: {written[:60]!r}"
    plain = written == text and ("\n" in text or text[:1] in "{[%@" or "#" in text or ": " in text)
    return Expected(
        "anything" if plain else "key",
        about,
        (name,),
        value,
        text.strip() in _NOTHING and not (written != text and text.strip()),
    )


def damage(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Spoil bytes of one file."""
    name = chance.choice(sorted(sample.files))
    path = folder / name
    data = bytearray(path.read_bytes())
    told = []
    for _ in range(chance.choice([1, 1, 2, 5, 30])):
        at = chance.randrange(len(data) + 1)
        to = min(len(data), at + chance.choice([0, 1, 1, 2, 10, 100]))
        way = chance.randrange(6)
        if way == 0:
            data[at:to] = b""
        elif way == 1:
            data[at:at] = data[at:to]
        elif way == 2:
            data[at:to] = bytes(chance.randrange(256) for _ in range(to - at))
        elif way == 3:
            data[at:to] = chance.choice(PIECES)
        elif way == 4 and at < len(data):
            data[at] ^= 1 << chance.randrange(8)
        elif way == 5 and chance.random() < 0.2:
            del data[at:]
        told.append(f"{way}@{at}:{to}")
        if not data:
            break
    path.write_bytes(bytes(data))
    return f"{name} {' '.join(told[:5])}"
