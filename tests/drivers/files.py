"""Small files for tests of the command line: a card, cards made from it, and a path with few increments."""

CARD = """name = "resin [a]"
revision = "2"

[units]
stress = "MPa"
time = "s"
temperature = "degC"

[elastic]
E = 3100.0
nu = 0.36
state = "instantaneous"

[prony]
relative_to = "instantaneous"
shear = [[1e-3, 0.06], [1e-1, 0.09], [10.0, 0.3], [2e3, 0.3]]
bulk = [[1.0, 0.02]]

[shift]
law = "wlf"
T_ref = 80.0
C1 = 14.2
C2 = 61.0
base = 10
measured = [60.0, 130.0]
outside = "extrapolate"

[expansion]
alpha = 6.2e-5

[service]
temperature = [65.0, 125.0]
time = [1e-2, 1e3]
"""

SOFTER = CARD.replace("E = 3100.0", "E = 3038.0")  # 2 % softer
BAD = CARD.replace("[1e-3, 0.06]", "[1e-3, 0.6]")  # fractions sum to 1.29

PATH = """name = "pull, dwell, quench"
mode = "uniaxial stress"

[units]
time = "min"
temperature = "degC"

[start]
temperature = 80.0

[[segment]]
label = "pull"
duration = 0.5
strain = 0.01
increments = 5

[[segment]]
label = "dwell"
duration = 60.0
increments = 8
spacing = "log"

[[segment]]
repeat = 2
segments = [
    { label = "quench", duration = 2.0, temperature = 70.0, increments = 4 },
    { label = "heat", duration = 2.0, temperature = 100.0, increments = 3 },
]
"""
ROWS = 1 + 5 + 8 + 2 * (4 + 3)  # the start included
