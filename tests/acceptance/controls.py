"""Group B: problems of optimal control."""

from math import log, pi, sqrt

from tests.acceptance.records import Case, Sort, at, parameter

MIN, MAX = Sort.MINIMUM, Sort.MAXIMUM
BRYSON_DENHAM = (
    "Bryson, Denham, Dreyfus (1963), Optimal programming problems with inequality constraints, AIAA J. 1; "
    "Bryson, Ho (1975), Applied Optimal Control, sec. 3.11"
)
DUBINS = "Dubins (1957), On curves of minimal length with a constraint on average curvature, Amer. J. Math. 79"
VAN_DER_POL = "Vassiliadis (1993), PhD thesis, Imperial College, for the family; value recomputed"
VASSILIADIS = "Vassiliadis, Sargent, Pantelides (1994), Ind. Eng. Chem. Res. 33"

CASES = (
    Case("B01", MIN, 6.0, 1e-6, "closed form: u = 6 - 12 t", ("smooth",), figures=(at("u", 0.25, 3.0, 1e-4),)),
    Case("B02", MIN, 1 + sqrt(6), 1e-6, "closed form: u = -1 until 1 + sqrt(3/2), then 1", ("bang-bang", "free time")),
    Case("B03a", MIN, 3 - sqrt(5), 1e-6, "closed form: thrust, coast, brake; t1 (3 - t1) = 1", ("bang-bang",)),
    Case("B03b", MIN, 3 - sqrt(5), 1e-6, "closed form: thrust, coast, brake; t1 (3 - t1) = 1", ("bang-bang",)),
    Case(
        "B04a", MIN, 4.0, 1e-6, BRYSON_DENHAM + ": 4/(9 l)", ("state constraint",),
        figures=(at("u", 0.1, -4.2, 1e-2),),
    ),
    Case("B04b", MIN, 100 / 27, 1e-6, BRYSON_DENHAM + ": 4/(9 l)", ("state constraint",)),
    Case(
        "B05", MIN, 2.24, 1e-6, BRYSON_DENHAM + ": 2 + 6 (1 - 4 l)^2", ("state constraint",),
        figures=(at("x", 0.5, 0.2),),
    ),
    Case(
        "B06", MIN, 0.2683938305689113, 1e-4,
        "closed form: geometric series of switches (Fuller, 1963); 0.2683 in Jacobson, Gershwin, Lele (1970), "
        "IEEE TAC 15 (from memory)",
        ("chattering",), known_to=1e-12,
    ),
    Case(
        "B09", MIN, 0.0, 1e-5, "closed form: u = -sin t; Aly, Chan (1973), Int. J. Control 17 (from memory)",
        ("singular arc",), figures=(at("x", "end", 1.0, 1e-2), at("x'", "end", 0.0, 1e-2)),
    ),
    Case(
        "B10", MIN, 0.1929092980931694, 1e-6, "closed form: Riccati, (1/2) tanh r/(r + tanh r), r = sqrt 2",
        ("smooth",), figures=(at("u", 0, -0.3858185961863388, 1e-4),),
    ),
    Case(
        "B11", MIN, sqrt(3) / 2, 1e-6, "closed form: algebraic Riccati equation (infinite horizon)", ("smooth",),
        known_to=1e-10, figures=(at("u", 0, -1.0, 1e-4),),
    ),
    Case(
        "B12", MIN, 4 / 3 * 18**0.25, 1e-6, "closed form: T + 6/T^3", ("smooth", "free time"),
        figures=(parameter("T", 18**0.25),),
    ),
    Case("B13", MIN, 2.5, 1e-6, "closed form: ramp, cruise, ramp", ("bang-bang", "state constraint", "free time")),
    Case(
        "B14", MIN, 2 * sqrt(17), 1e-6,
        "closed form: coast to (sqrt 612 - 12)/9, then full thrust; Meditch (1964), On the problem of optimal "
        "thrust programming for a lunar soft landing, IEEE TAC 9, for the structure",
        ("bang-bang", "free time"), figures=(parameter("T", 4.164140834156881, 1e-4),),
    ),
    Case(
        "B15", MIN, 323.0324076820461, 1e-5,
        "closed form: coast to 7.691890218711753 s, then full thrust (rocket equation); Meditch (1964) for the "
        "structure",
        ("bang-bang", "free time", "scaling", "units"), known_to=1e-9,
        figures=(parameter("T", 48.07094117896752, 1e-2),),
    ),
    Case(
        "B17", MIN, 2.194335081419454, 1e-6, "closed form: |(2 - T/2, 2)| = T (Zermelo, 1931)",
        ("smooth", "free time"), figures=(at("a", 1.0, 1.146765287304156, 1e-4),),
    ),
    Case(
        "B19", MIN, 3 * sqrt(2) + pi / 2, 1e-4, "closed form: left, straight, left; " + DUBINS,
        ("singular arc", "free time"),
    ),
    Case(
        "B20", MIN, 7 * pi / 3, 1e-4, "closed form: three arcs pi/3, 5 pi/3, pi/3; " + DUBINS,
        ("bang-bang", "free time", "several optima"),
    ),
    Case(
        "B21", MAX, (10 - log(9)) / 4, 1e-5,
        "closed form: u = 0 to ln 9, then u = 1/4; Clark (1976), Mathematical Bioeconomics", ("singular arc",),
        figures=(at("x", 5, 0.5, 1e-4),),
    ),
    Case(
        "B22", MIN, 0.5545708783346031, 1e-6,
        "closed form: tan u linear in t; Bryson, Ho (1975), Applied Optimal Control, sec. 2.4; Dolan, More, "
        "Munson (2004), ANL/MCS-TM-273, problem 9, prints 0.554577 (200 intervals)",
        ("smooth", "free time"),
        figures=(at("u", 0, 54.6263551908366 * pi / 180, 1e-4), at("x", "end", 12.47784476252857, 1e-4)),
    ),
    Case("B23", MIN, 4.085211027246999, 1e-6, "closed form: controllability Gramian", ("smooth",)),
    Case(
        "B24a", MIN, 3.362056904943002, 1e-4,
        "closed form: two layers; Rao, Mease (1999), Dichotomic basis approach to solving hyper-sensitive "
        "optimal control problems, Automatica 35",
        ("boundary layer",), known_to=1e-9, figures=(at("u", 0, 1 - sqrt(2), 1e-2), at("x", 5000, 0.0, 1e-3)),
    ),
    Case(
        "B24b", MIN, 6.724113809886004, 1e-4,
        "closed form: two layers; Rao, Mease (1999), Automatica 35: 6.7241 (from memory)", ("boundary layer",),
        known_to=1e-9,
    ),
    Case(
        "B25", MIN, -0.0480556858608775, 1e-5,
        "closed form: u = 1 to 0.1362990345945556, 0.2271420827084978 to 0.7252301075916548, then 0; Gunn, "
        "Thomas (1965), Mass transport and chemical reaction in multifunctional catalyst systems; Dolan, More, "
        "Munson (2004), ANL/MCS-TM-273, problem 14: -4.80556e-2",
        ("singular arc",), known_to=1e-14, figures=(at("u", 0.4, 0.2271420827084978, 1e-2),),
    ),
    Case(
        "B26", MAX, 1.01283691831751, 1e-5,
        "Dolan, More, Munson (2004), ANL/MCS-TM-273, problem 10: 1.01283; more digits by indirect integration; "
        "Goddard (1919)",
        ("singular arc", "free time"), known_to=1e-12, figures=(parameter("T", 0.19885626210520, 1e-3),),
    ),
    Case(
        "B27", MAX, 18550.87133918, 1e-5,
        "Bryson, Ho (1975), Applied Optimal Control; Betts (2010), Practical Methods for Optimal Control and "
        "Estimation: 18550.872 ft (from memory); more digits by indirect integration",
        ("singular arc", "free time", "scaling"), known_to=1e-6, figures=(parameter("T", 42.88791108860, 5e-2),),
    ),
    Case(
        "B29a", MIN, 29.37607966, 1e-6,
        "Jacobson, Mayne (1970), Differential Dynamic Programming; Sage, White (1977), Optimum Systems Control, "
        "ch. 5: 29.376 (from memory); recomputed",
        ("smooth",), known_to=1e-7,
        figures=(
            at("u", 0, 5.1627963722, 1e-3), at("x1", "end", 1.4209766212, 1e-4), at("x2", "end", 1.8466304335, 1e-4),
        ),
    ),
    Case(
        "B29b", MIN, 42.80743761, 1e-6,
        "Jacobson, Mayne (1970), Differential Dynamic Programming, for the problem (from memory); value recomputed",
        ("bang-bang",), known_to=1e-7,
    ),
    Case(
        "B31", MIN, 2.8669524225, 1e-6, VAN_DER_POL, ("smooth",), known_to=2e-10,
        figures=(
            at("u", 0, -0.4116986965, 1e-3), at("x1", "end", 0.0664524415, 1e-4), at("x2", "end", -0.0518735320, 1e-4),
        ),
    ),
    Case("B32a", MIN, 2.867261, 1e-5, VAN_DER_POL, (), known_to=1e-6),
    Case(
        "B32b", MIN, 2.95388, 1e-5, VASSILIADIS + ": 2.9539 (from memory); recomputed", ("state constraint",),
        known_to=5e-6,
    ),
    Case(
        "B32c", MIN, 3.59027, 1e-5, VASSILIADIS + " for the problem (from memory); value recomputed",
        ("state constraint",), known_to=2e-5,
    ),
    Case(
        "B34", MIN, 1.3440812, 1e-5,
        "Sager (2005), Numerical methods for mixed-integer optimal control problems, PhD thesis, Heidelberg: "
        "1.34408 (from memory); recomputed",
        ("bang-bang", "singular arc"), known_to=1e-7,
    ),
    Case(
        "B36", MAX, 0.573545, 1e-5,
        "Ray (1981), Advanced Process Control; Logsdon, Biegler (1989), Ind. Eng. Chem. Res. 28: 0.57353 (from "
        "memory); recomputed",
        (), known_to=1e-6, figures=(at("u", 0, 0.74354, 1e-3),),
    ),
    Case(
        "B37", MAX, 0.610803, 1e-5,
        "Ray (1981), Advanced Process Control; Logsdon, Biegler (1989), Ind. Eng. Chem. Res. 28: 0.610775 with "
        "coarse controls (from memory); recomputed",
        (), known_to=1e-6,
    ),
)  # fmt: skip
