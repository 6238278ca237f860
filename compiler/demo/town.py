"""Brindlemouth, an invented town, its water mains and four invented hours of measurement. Nothing here is real."""

from dataclasses import dataclass

from rootwright.demo.laws import Pipe, Pump
from rootwright.demo.network import Case, Junction, Network, Sensor

SEED = 19


@dataclass(frozen=True, slots=True)
class Unknown:
    """What is to be found. Values in SI units; shown in `unit`, which is `shown` times as many."""
    name: str
    unit: str
    shown: float
    handbook: float             # where the search starts
    factor: float               # by which the handbook's value may well be wrong
    planted: float              # the truth


UNKNOWNS = (
    Unknown("roughness, iron mains of the harbour", "mm", 1.0e3, 0.80e-3, 5.0, 2.6e-3),
    Unknown("roughness, cement-lined mains", "mm", 1.0e3, 0.15e-3, 5.0, 0.42e-3),
    Unknown("roughness, steel trunk mains", "mm", 1.0e3, 0.06e-3, 5.0, 0.19e-3),
    Unknown("roughness, mains of Kite Terrace", "mm", 1.0e3, 0.10e-3, 5.0, 0.35e-3),
    Unknown("opening of the gate", "%", 100.0, 0.5, 3.0, 0.135),
    Unknown("works pumps, head at no flow", "m", 1.0, 64.0, 1.05, 60.5),
)
OPENING, SHUT_OFF_HEAD = 4, 5
ROUGHNESS = {"iron": 0, "lined": 1, "steel": 2, "terrace": 3, "plastic": 0.01e-3}      # an unknown, or known: new pipes

# name, elevation in m, demand in L/s on an average day
_JUNCTIONS = """
W0 12 0.0   W1 18 0.0   L1 16 0.0
A1 20 2.0   A2 21 1.7   A3 18 1.9   A4 18 1.3   A5 18 2.0
B1 16 0.9   B2 18 1.4   B3 16 1.0   B4 18 1.0   B5 15 2.0
C1 11 1.6   C2 14 1.0   C3 12 1.0   C4 12 1.2   C5 12 1.5
D1  8 1.6   D2  7 1.0   D3  7 1.3   D4  6 1.6   D5  7 1.5
E1  7 1.8   E2  7 1.6   E3  7 1.3   E4  5 1.9   E5  5 1.0
U1 34 0.8   U2 38 1.1   U3 43 0.9   U4 40 1.2   U5 45 0.9   U6 46 1.0   U7 42 0.8
b1 22 1.0   b2 24 0.9   b3 13 1.2   b4  6 0.8   b5  5 0.9   b6  6 1.1   b7 23 0.9   b8 24 0.8   b9 10 0.9   b0 11 0.8
"""

# from, to, length in m, diameter in mm, group; the pipe C3-D3 crosses Tanner's Bridge and holds the gate
_PIPES = """
W0 W1 640 350 steel     W1 A3 310 300 steel     W1 A5 420 250 steel     C3 D3 250 250 steel
L1 E2 330 250 steel     L1 E4 360 250 steel     LH L1 520 300 steel
A1 B1 225 150 lined     B1 C1 260 150 lined     A2 B2 230 150 lined     B2 C2 295 150 lined
A3 B3 225 250 lined     B3 C3 275 250 lined     A4 B4 260 150 lined     B4 C4 245 150 lined
A5 B5 300 200 lined     B5 C5 230 200 lined     A1 A2 235 200 lined     A2 A3 225 200 lined
A3 A4 165 200 lined     A4 A5 265 200 lined     B1 B2 170 150 lined     B2 B3 280 150 lined
B3 B4 245 150 lined     B4 B5 250 150 lined     C1 C2 285 200 lined     C2 C3 290 200 lined
C3 C4 210 200 lined     C4 C5 210 200 lined     C1 D1 315 125 iron      C5 D5 260 125 iron
D1 E1 320 150 iron      D2 E2 250 150 iron      D3 E3 195 200 iron      D4 E4 205 150 iron
D5 E5 325 150 iron      D1 D2 270 150 iron      D2 D3 215 150 iron      D3 D4 255 150 iron
D4 D5 235 150 iron      E1 E2 250 200 iron      E2 E3 285 200 iron      E3 E4 230 200 iron
E4 E5 170 200 iron      U1 U2 210 150 terrace   U2 U3 180 125 terrace   U3 U4 240 125 terrace
U1 U4 260 125 terrace   U3 U5 190 100 terrace   U5 U6 150 100 terrace   U4 U7 230 100 terrace
A1 b1 180 100 plastic   b1 b2 160  80 plastic   B5 b3 210 100 plastic   D5 b4 140 100 plastic
b4 b5 190  80 plastic   E1 b6 170 100 plastic   A2 b7 200 100 plastic   b7 b8 150  80 plastic
C1 b9 175 100 plastic   C5 b0 185 100 plastic
"""
GATED = "C3-D3"

# The works' pumps are worn and their head at no flow is unknown; the booster's curve is its maker's.
_WORKS = {"c": 6000.0, "T0": 80.0, "T1": 2000.0, "Tb": 380.0, "sb": 0.12, "N": 157.0}
_PUMPS = (
    Pump("works pump 1", "WW", "W0", SHUT_OFF_HEAD, **_WORKS),
    Pump("works pump 2", "WW", "W0", SHUT_OFF_HEAD, **_WORKS),
    Pump("booster", "C5", "U1", 38.0, c=2.4e4, T0=16.0, T1=1300.0, Tb=90.0, sb=0.14, N=157.0),
)

# name, demand over the average day's, levels of the works' well and of the tank on Lantern Hill in m, flows drawn from
# hydrants in m^3/s
CASES = (
    Case("03:10, town asleep", 0.35, {"WW": 11.4, "LH": 55.6}, {}),
    Case("07:40, town awake", 1.75, {"WW": 11.1, "LH": 57.9}, {}),
    Case("10:15, hydrant at Ropewalk (E1)", 1.05, {"WW": 11.2, "LH": 57.2}, {"E1": 32.0e-3}),
    Case("14:30, hydrant at Kite Terrace (U6)", 0.95, {"WW": 11.2, "LH": 56.8}, {"U6": 11.0e-3}),
)
_LOGGERS = ("W0", "A1", "A5", "B3", "C1", "C3", "C5", "D1", "D3", "D5", "E1", "E4", "U1", "U3", "U6", "U7")
_METERS = ("works pump 1", "booster", "LH-L1", "C3-D3")
HEAD_ERROR, FLOW_ERROR = 0.10, 0.3e-3                           # standard deviations of a reading: m, m^3/s


def brindlemouth():
    """The Network of the town, with its sensors."""
    words = _JUNCTIONS.split()
    junctions = tuple(Junction(name, float(elevation), 1e-3*float(demand))
                      for name, elevation, demand in zip(*(words[k::3] for k in range(3))))
    words = _PIPES.split()
    pipes = tuple(
        Pipe(f"{start}-{end}", start, end, float(length), 1e-3*float(bore), ROUGHNESS[group],
             OPENING if f"{start}-{end}" == GATED else None)
        for start, end, length, bore, group in zip(*(words[k::5] for k in range(5))))
    sensors = (*(Sensor("head", name, HEAD_ERROR) for name in _LOGGERS),
               *(Sensor("flow", name, FLOW_ERROR) for name in _METERS))
    return Network(junctions, ("WW", "LH"), (*pipes, *_PUMPS), sensors)
