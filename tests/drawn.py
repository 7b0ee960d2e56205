"""A trap of an invented laboratory as a drawing of its electrodes, and campaigns that use it."""

from __future__ import annotations

from pathlib import Path

from reduction.contract import TRAP
from reduction.drawing import Drawing
from reduction.drawingcheck import check_outlines
from reduction.drawingfile import read_drawing
from reduction.entries import filled, read_entries, require
from reduction.errors import Fault, Faults
from reduction.yamlfile import read_yaml

DRAWING = """\
electrodes:
  dc_applied: both_plates
  dimensions_mm:
    ring_radius: 11.30(6)
    wire_radius: {value: 1.00, half_width: 0.02, shape: rectangular}
    plate_height: 8.00(5)
    hole_radius: 1.00(3)
    plate_radius: 14.0
  conductors:
    ring:
      carries: drive
      circle: {centre: [ring_radius, 0], radius: wire_radius}
    plate:
      carries: dc_above
      mirrored: yes
      rectangle: {r: [hole_radius, plate_radius], z: [plate_height, [plate_height, 2]]}
    can:
      carries: ground
      outline: [[0, 40], [30, 40], [30, -39], [0, -39]]
"""
OTHER = "stray_field_V_per_m: 0(40)\ndc_polarity: 1\n"
TEXT = OTHER + DRAWING


def read(folder: Path, text: str = TEXT) -> tuple[Drawing | None, list[Fault]]:
    """The drawing in a trap file, its outlines checked, and every fault."""
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / "ring-a.yaml"
    path.write_text(text, encoding="utf-8")
    faults = Faults()
    mapping = read_yaml(path, "traps/ring-a.yaml", faults=faults)
    if mapping is None:
        return None, list(faults)
    entries = read_entries(mapping, TRAP, "traps/ring-a.yaml", faults=faults)
    require(entries, TRAP, "traps/ring-a.yaml", faults=faults, advice="Add the key.")
    drawing = read_drawing(filled(entries), "traps/ring-a.yaml", faults=faults)
    if drawing is not None:
        check_outlines(drawing, "traps/ring-a.yaml", faults=faults)
    return drawing, list(faults)


def drawing_of(folder: Path, text: str = TEXT) -> Drawing:
    """The drawing in a trap file that has no fault."""
    drawing, faults = read(folder, text)
    assert faults == [], "\n".join(map(str, faults))
    assert drawing is not None
    return drawing


def changed(*pairs: tuple[str, str]) -> str:
    """Text of the trap file with texts replaced, each of which stands there once."""
    text = TEXT
    for old, new in pairs:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


def draw(path: Path, drawing: str = DRAWING) -> Path:
    """Put a drawing into a trap file in place of its two constants."""
    kept = [line for line in path.read_text(encoding="utf-8").splitlines() if "_per_volt_" not in line]
    path.write_text("\n".join(kept) + "\n" + drawing, encoding="utf-8")
    return path
