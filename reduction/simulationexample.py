"""The plan of the campaign in `data_example/`: one of everything, with few particles."""

from __future__ import annotations

from dataclasses import replace

from reduction.simulationplan import Habits, Plan, Visit

EXAMPLE_SEED = 7
LANTERN_B = """\
# Measured, in the story, with a caliper and a photograph, in mm; the constants of the trap follow from it.
electrodes:
  dc_applied: both_plates
  dimensions_mm:
    ring_radius: 11.30(6)            # of the middle of the wire, from a photograph along the axis
    wire_radius: {value: 1.00, half_width: 0.02, shape: rectangular}   # the wire's own tolerance
    plate_height: 8.00(4)            # half the clear distance between the plates, with gauge blocks
    plate_thickness: 2.00(2)
    hole_radius: 1.00(3)             # particles come in from above, light from below
    plate_radius: 14.0(1)
    can_radius: 30.0(5)
    can_height: 40.0(5)
  conductors:
    ring:
      carries: drive
      circle: {centre: [ring_radius, 0], radius: wire_radius}
    plate:
      carries: dc_above
      mirrored: yes                  # the lower plate, which carries dc_below
      rectangle: {r: [hole_radius, plate_radius], z: [plate_height, [plate_height, plate_thickness]]}
    can:
      carries: ground
      outline: [[0, can_height], [can_radius, can_height], [can_radius, -can_height], [0, -can_height]]
"""
"""Trap `lantern-b`, wired the other way than `lantern-a`: its constants agree with those the regime states."""


def example_plan() -> Plan:
    """Return the plan that `data_example/` was made by, with the seed `EXAMPLE_SEED`."""
    bench = {"dc_voltage": "supply-1", "height": "camera-1"}
    loft = {"dc_voltage": "supply-2"}
    usual = Habits(contacts=20)
    return Plan(
        title="Which tray lining charges the beads? (invented data)",
        sessions=8,
        particles=5,
        schedule=(
            Visit("room_air_light", "PTFE"),
            Visit("room_air_light", "glass"),
            Visit("room_air_dense", "nylon"),
            Visit("room_air_dense", "wool"),
            Visit("low_pressure", "PTFE"),
            Visit("low_pressure", "glass"),
            Visit("room_air_light", "nylon", trap=1),
            Visit("room_air_light", "wool", trap=1),
        ),
        drawings={"lantern-b": LANTERN_B},
        options={"compare": "{quantity: surface_charge_density, by: charged_with}"},
        habits=usual,
        differing={
            "s001": replace(
                usual,
                instruments=bench,
                excluded_particles={"p04": "two beads stuck together, seen under the lamp"},
                outlier_readings=("height:p02:5",),
                attributes={"lining": "new sheet"},
                notes="One height of p02 was read while the shelf shook; it is left in to show how it is flagged.",
            ),
            "s002": replace(
                usual,
                instruments=bench,
                dialect="semicolon",
                drive_voltage="rms",
                excluded_readings={"balance:p03:4": "draught from the door"},
                attributes={"lining": "new sheet"},
                notes="Logged with a spreadsheet that writes decimal commas.",
            ),
            "s003": replace(usual, lost=2, instruments=loft),
            "s004": replace(
                usual,
                instruments=loft,
                unstated=("height_mm",),
                notes="The camera was new: nobody knew yet how well a height can be read.",
            ),
            "s005": replace(usual, drive_voltage="peak_to_peak"),
            "s006": replace(usual, dialect="tab", secular_reading="response_peak"),
            "s007": replace(usual, own_diameters=True, height_reading="streak_middle"),
            "s008": replace(usual, u_in_logs=True, units={"height": "um", "drive_voltage": "kV"}),
        },
    )
