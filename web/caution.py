"""The caution that every page, report and table of a result carries.

It stands on every result, whatever the problem's title says: a program cannot tell from a name in a document whether
acting on the curve moves a load, bends a structure, heats a vessel or steers a vehicle.
"""

CAUTION = (
    "This result holds for the stated model only. Machine limits, interlocks, local codes and licensed practice come "
    "first."
)

CAUTION_IN_FULL = (
    f"{CAUTION} Where acting on it can hurt someone (moving loads, structures, heat, vehicles, pressure), have it "
    "checked by whoever answers for the machine before anything moves."
)
"""For the report and for people who meet their first result."""
