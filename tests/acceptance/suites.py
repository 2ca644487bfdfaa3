"""Group C: problems of published benchmark suites and of longer studies."""

from math import asin, atanh, pi, sqrt

from tests.acceptance.records import Case, Sort, Unsaid, at, parameter

MIN, MAX = Sort.MINIMUM, Sort.MAXIMUM
REPORT = "Dolan, More, Munson (2004), ANL/MCS-TM-273"
BETTS = "Betts (2010), Practical Methods for Optimal Control and Estimation, 2nd ed."

_SINE = (sqrt(10) - 1) / 3  # the cam leaves its tangent where r' = sin t/cos^2 t = 1.5
_ANGLE_SLOPE = (2 - 1 / sqrt(1 - _SINE**2)) / 1.5
CAM = 2.5 * (
    atanh(_SINE) + _ANGLE_SLOPE * (2 + 1 / sqrt(1 - _SINE**2)) / 2 + 2 * (2 * pi / 5 - asin(_SINE) - _ANGLE_SLOPE)
)

CASES = (
    Case(
        "C03", MIN, 5.236595834e-3, 1e-6,
        REPORT + ", problem 12: 5.2366e-3; data of Tjoa, Biegler (1991), Ind. Eng. Chem. Res. 30; more digits "
        "recomputed",
        ("smooth", "parameter fit"), known_to=1e-12,
        figures=(
            parameter("a", 11.8467386579, 1e-3), parameter("b", 8.3445197548, 1e-3),
            parameter("c", 1.0014396255, 1e-3),
        ),
    ),
    Case(
        "C05", MIN, 19.87216693, 1e-6,
        REPORT + ", problem 5: 19.8721; data of Box, Hunter, MacGregor, Erjavec (1973), Technometrics 15; more "
        "digits recomputed",
        ("smooth", "parameter fit", "scaling"), known_to=5e-9,
        figures=(
            parameter("a", 5.925848774e-5, 1e-8), parameter("b", 2.963402108e-5, 1e-8),
            parameter("c", 2.047283970e-5, 1e-8), parameter("d", 2.744679328e-4, 1e-7),
            parameter("e", 3.997950004e-5, 1e-8),
        ),
    ),
    Case(
        "C06", MIN, 1.9746529716e7, 1e-6,
        REPORT + ", problem 6: 1.97462e7; data of Rothschild and others (1997); more digits recomputed",
        ("smooth", "parameter fit", "scaling"), known_to=1e-2,
        figures=(parameter("g1", 0.6920073, 1e-3), parameter("m1", 0.2743062, 1e-3)),
    ),
    Case(
        "C07", Sort.SOLUTION, 0.0, 1e-6, REPORT + ", problem 7; figures by a boundary value solver to 11 digits",
        ("smooth", "boundary value problem", "higher order"),
        figures=(at("u", 0.5, 0.5967472117, 1e-6), at("u'", 0.5, 1.4343632844, 1e-5), at("u''", 0, 10.0367718, 1e-4)),
    ),
    Case(
        "C12", Sort.SUPREMUM, CAM, 1e-5,
        "closed form: tangent of the start circle, steepest rise, outer circle, which it meets with a corner (r'' " +
        "has no least value), so no curve of the class attains it; " +
        REPORT + ", problem 3, has the same problem on grids: 4.2743 at 800 intervals (from memory)",
        ("state constraint",), known_to=1e-12,
    ),
    Case(
        "C13", MAX, 34.1411843, 1e-5,
        BETTS + " sec. 6.1: 34.1412 deg, 2008.59 s (from memory); more digits recomputed",
        ("free time", "scaling", "units"), known_to=1e-5, figures=(parameter("T", 2008.59, 1.0),),
    ),
    Case(
        "C15", MIN, 2030.856, 5e-4, BETTS + ": 2030.85609 (from memory)", ("state constraint", "boundary layer"),
        known_to=1e-1,
    ),
    Case(
        "C16a", MIN, 0.0375194639, 1e-5,
        "Sakawa, Shindo (1982), Optimal control of container cranes, Automatica 18; " +
        BETTS + ": 0.0375194596 (from memory); recomputed",
        ("state constraint",), known_to=5e-9,
    ),
    Case(
        "C16b", MIN, 0.0051502, 1e-3,
        "Goh, Teo (1988), Automatica 24: 0.005361 with coarse controls (from memory); recomputed",
        ("singular arc", "state constraint"), known_to=2e-6,
    ),
    Case(
        "C17", MIN, 7571.670037, 1e-5,
        "Ledzewicz, Schaettler (2007), Antiangiogenic therapy in cancer treatment as an optimal control "
        "problem, SIAM J. Control Optim. 46; " +
        BETTS + ": 7571.67158 (from memory); recomputed",
        ("singular arc", "free time", "scaling"), known_to=1e-4, figures=(parameter("T", 1.19635, 1e-2),),
    ),
    Case(
        "C18", MIN, 2.98227994, 1e-5,
        "Weinreb, Bryson (1985), IEEE TAC 30; Luus (2000), Iterative Dynamic Programming: 2.9822 (from memory); "
        "recomputed with free switches",
        ("bang-bang", "free time"), known_to=1e-8,
    ),
    Case(
        "C19", MAX, 10.09416, 1e-4,
        "Luus, Dittrich, Keil (1992), Multiplicity of solutions in the optimization of a bifunctional catalyst blend, "
        "Can. J. Chem. Eng. 70; Floudas et al. (1999), Handbook of Test Problems: 10.0942e-3 (from memory); recomputed",
        ("arcs", "several optima", "scaling", "guess given"), known_to=5e-6,
        figures=(parameter("u1", 0.66608, 1e-4), parameter("u2", 0.6735, 1e-4), parameter("u3", 0.67627, 1e-4)),
    ),
    Case(
        "C20", Sort.NOT_ATTAINED, 0.1192, 1e-2,
        "Luus (2000), Iterative Dynamic Programming: 0.12011 with coarse controls (from memory); the control "
        "oscillates ever faster, recomputed to 3 digits",
        ("chattering", "several optima", "no minimiser"), known_to=1e-3,
    ),
)  # fmt: skip

UNSAID = (
    Unsaid(
        "C21",
        "Low-thrust transfer",
        "the published value and the data as remembered contradict each other, so it proves nothing",
    ),
    Unsaid("C22", "Least time to climb", "needs tables of thrust and drag; the published data are not restated"),
    Unsaid("C23", "Abort landing in a windshear", "the published data are not restated"),
)
