"""A commented scenario to start from."""

# ruff: noqa: E501  (a table in braces stands on one line of TOML)

from __future__ import annotations

TEMPLATE = """\
# A scenario of purity: what is known of one lot, and the choices open at each step.
# Replace the numbers by yours, then: purity rank FILE
#
# Quantities are text with a unit: "1180 degC", "45 min", "4 L/min", "1e-3 mbar", "25 mm".
# What is not known exactly is a range "2 to 10 ppm", a factor "3 ppm x/ 2", a tolerance
# "1180 +- 10 degC" (5 % and 95 % points), or "<0.05" for a content below detection.
# A number alone is ppm by mass in certificate and limits, else kg, degC, min, mm, cm2, L, Pa,
# L/min of gas (at 0 degC and 1 atm), L/s of a pump, mbar L/s of a leak, d for days_in_air.
# ppm of a gas is by volume; ppm(mol) is by mole.

title = "Copper remelt"
risk = 0.05                  # accepted chance of passing any limit

[lot]
host = "Cu"
mass = "25 kg"
# As certified. A method and its detection limit may stand with the value.
certificate = { Ag = 1.2, Fe = 0.30, Ni = 0.10, S = 0.8, H = 0.1, C = 1.0, Si = "<0.05", Al = "<0.05", O = { value = 2.0, method = "inert gas fusion", detection = 0.5 } }
# The most that the lot may contain; "metals" is the sum without C N O H S, "Fe+Ni" a sum of your own.
limits = { Fe = 1.0, Ni = 1.0, Si = 0.5, Al = 0.5, S = 2.0, O = 5.0, H = 0.5, C = 5.0, metals = 10.0, "Fe+Ni" = 1.5 }

[lot.charge]                 # the pieces that go into the furnace, with what their surface carries
# slab | cylinder | sphere | wire | granules; count = 6 would be checked against the mass
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"           # as received | etched | machined | worked
days_in_air = 3

[furnace]                    # the gas that reaches the metal is made from these
volume = "120 L"
leak = "5e-4 mbar L/s"       # or leak_up = "0.6 Pa/h", the rise of pressure with the pump shut off
pump = "150 L/s"
outgassing = "2e-3 mbar L/s x/ 3"
hot_zone = "graphite"        # none | graphite | molybdenum | tungsten | ceramic muffle | quartz tube | steel retort
purges = 3                   # pump-and-fill cycles before the step
# exhaust = { O2 = "3 ppm", dew_point = "-58 degC" }   # measured with gas flowing: wins over the above

[[step]]
name = "melt"
process = "melt"             # melt | cast | heat | clean | touch | store
# Time and temperature of the metal, linear in between; or one temperature and a duration.
temperature = [["0 min", "1095 degC"], ["20 min", "1180 degC"], ["60 min", "1180 degC"]]
wall_area = "1020 cm2"       # wetted by the melt; or form = { shape = "cylinder", diameter = "150 mm" }
free_surface = "175 cm2"     # open to the gas
stirring = "induction"       # quiescent | induction | bubbled
immersed = []                # everything else that touches the melt, "fused silica sheath"; [] says none

# A choice may set any key of its step. Names come from the tables (purity data) or are described in line:
#   container = { name = "our alumina", phases = { Al2O3 = 0.997 }, traces = { SiO2 = "1000 ppm" }, leach_depth = "20 um x/ 3" }
#   atmosphere = { Ar = "rest", O2 = "2 ppm", dew_point = "-65 degC" }
[[step.choice]]
name = "graphite under argon"
container = "isostatic graphite, purified"
atmosphere = "argon N5.0"
flow = "4 L/min"             # or sealed = "120 L", pumped = true, still = true

[[step.choice]]
name = "magnesia under vacuum"
container = "magnesia"
atmosphere = "vacuum"
pressure = "1e-3 mbar"

[[step]]
name = "store"
process = "store"
temperature = "22 degC"
duration = "180 d"
form = { shape = "cylinder", diameter = "150 mm", height = "12 mm" }   # or area = "0.54 m2"
atmosphere = "clean-room air"

[[step.choice]]
name = "open shelf"

[[step.choice]]
name = "polyethylene bag with desiccant"
package = { barrier = "polyethylene", thickness = "100 um", area = "0.6 m2", head_space = "2 L", fill = "clean-room air", desiccant = "50 g", desiccant_kind = "silica gel" }
"""


def text() -> str:
    """Return a scenario that runs as it stands, with a comment for every key."""
    return TEMPLATE
