"""The plan of the campaign in `data_example/`: one of everything, with few particles."""

from __future__ import annotations

from dataclasses import replace

from reduction.simulationplan import Habits, Plan, Visit

EXAMPLE_SEED = 7


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
