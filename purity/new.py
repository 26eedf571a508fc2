"""A commented scenario to start from."""

from __future__ import annotations

TEMPLATE = """\
# A scenario of purity: what is known of one lot, and the choices open at each step.
# Replace the numbers by yours, then: purity rank FILE
#
# Quantities are text with a unit: "1180 degC", "45 min", "4 L/min", "1e-3 mbar", "25 mm".
# Contents are ppm by mass unless a unit says otherwise.
# What is not known exactly is a range "2 to 10 ppm", a factor "3 ppm x/ 2", a tolerance
# "1180 +- 10 degC" (5 % and 95 % points), or "<0.05" for a content below detection.

title = "Copper remelt"
risk = 0.05                  # accepted chance of passing any limit

[lot]
host = "Cu"
mass = "25 kg"

[lot.certificate]            # ppm by mass; a method and its detection limit may stand with the value
Ag = 1.2
Fe = 0.30
Ni = 0.10
Si = "<0.05"
Al = "<0.05"
C = 1.0
H = 0.1
S = 0.8
O = { value = 2.0, method = "inert gas fusion", detection = 0.5 }

[lot.limits]                 # the most that the lot may contain
Fe = 1.0
Ni = 1.0
Si = 0.5
Al = 0.5
C = 5.0
H = 0.5
S = 2.0
O = 5.0
"Fe+Ni" = 1.5                # a sum of your own
metals = 10.0                # the sum of all but C N O H S

[lot.charge]                 # the pieces that go into the furnace, with what their surface carries
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"           # as received | etched | machined | worked
days_in_air = 3

[furnace]                    # the gas that reaches the metal is made from these
volume = "120 L"
leak = "5e-4 mbar L/s"
pump = "150 L/s"
outgassing = "2e-3 mbar L/s x/ 3"
hot_zone = "graphite"        # graphite | molybdenum | tungsten | ceramic muffle | quartz tube | steel retort
purges = 3
# exhaust = { O2 = "3 ppm", dew_point = "-58 degC" }   # measured with gas flowing: wins over the above

[[step]]
name = "melt"
process = "melt"             # melt | cast | heat | clean | touch | store
# Time and temperature of the metal, linear in between.
temperature = [["0 min", "1095 degC"], ["20 min", "1180 degC"], ["60 min", "1180 degC"]]
wall_area = "1020 cm2"       # wetted by the melt
free_surface = "175 cm2"     # open to the gas
stirring = "induction"       # quiescent | induction | bubbled
immersed = []                # everything else that touches the melt; [] says none

# A choice may set any key of its step. A name comes from the tables (purity data), or stands for a
# description: container = { name = "our alumina", phases = { Al2O3 = 0.997 }, traces = { SiO2 = "1000 ppm" } }
[[step.choice]]
name = "graphite under argon"
container = "isostatic graphite, purified"
atmosphere = "argon N5.0"
flow = "4 L/min"

[[step.choice]]
name = "magnesia under vacuum"
container = "magnesia"
atmosphere = "vacuum"
pressure = "1e-3 mbar"
"""


def text() -> str:
    """Return a scenario that runs as it stands, with a comment for every key."""
    return TEMPLATE
