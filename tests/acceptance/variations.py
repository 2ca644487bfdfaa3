"""Group A: problems of the calculus of variations, nearly all with a closed form."""

from math import atan, cos, cosh, exp, pi, sin, sinh, sqrt, tan, tanh

from tests.acceptance.records import Case, Sort, at, parameter

MIN, MAX = Sort.MINIMUM, Sort.MAXIMUM
CATENARY = "closed form: catenary"
FIN = (
    "closed form: t = 1 - x/L, y = (L - x)^2/2, L = 2; Duffin (1959), A variational problem relating to cooling fins, "
    "J. Math. Mech. 8 (from memory)"
)

CASES = (
    Case("A01", MIN, sqrt(2), 1e-6, "closed form: chord length", ("smooth",), figures=(at("y", 0.5, 0.5),)),
    Case(
        "A02", MIN, 1.209429202888189, 1e-6, "closed form: spherical law of cosines, arccos(cos(pi/3) cos(pi/4))",
        ("smooth",), figures=(at("th", pi / 4, atan(1 / (cos(pi / 4) / tan(pi / 3) + sin(pi / 4)))),),
    ),
    Case(
        "A03", MIN, sqrt((pi / 2) ** 2 + 1), 1e-6, "closed form: the cylinder unrolled", ("smooth",),
        figures=(at("z", pi / 4, 0.5),),
    ),
    Case(
        "A04", MIN, sqrt(3), 1e-6, "closed form: the cone unrolled to 60 degrees, s^2 = 1 + 4 - 4 cos 60", ("smooth",),
        figures=(at("s'", 0, 0.0),),
    ),
    Case(
        "A05", MIN, 0.9624236501192069, 1e-6, "closed form: arccosh(3/2), arc of the circle (x - 1/2)^2 + y^2 = 5/4",
        ("smooth",), figures=(at("y", 0.5, sqrt(5) / 2),),
    ),
    Case(
        "A06", MIN, 0.5828954631547426, 1e-4,
        "closed form: cycloid x = r(t - sin t), y = r(1 - cos t), r = 0.5729170375317503, t1 = 2.412011143913525",
        ("singular endpoint",), figures=(at("y", 0.5729170375317503 * (pi / 2 - 1), 0.5729170375317503, 1e-3),),
    ),
    Case(
        "A07", MIN, 1.387656796933747, 1e-4,
        "closed form: cycloid, r = 0.8948297746012973, t1 = 4.594585712433428 > pi", ("singular endpoint",),
        figures=(at("y", 2.811190646100846, 1.789659549202595, 1e-3),),
    ),
    Case(
        "A08", MIN, 0.4859275826347645, 1e-6,
        "closed form: cycloid whose cusp is v0^2/(2g) above the start, r = 0.6190396555268152, t from "
        "0.4086317226238018 to 2.343034111702949",
        ("smooth",),
    ),
    Case(
        "A09", MIN, 0.565900962579585, 1e-4, "closed form: half a cycloid, r = 1/pi, T = sqrt(pi/g)",
        ("singular endpoint", "free end"), figures=(at("y", 1, 2 / pi, 1e-3), at("y'", 1, 0.0, 1e-3)),
    ),
    Case(
        "A10", MIN, pi * sqrt(3) / 2, 1e-3,
        "closed form: hypocycloid with least radius 1/2, T = sqrt(s(2 pi - s)), s = pi/2", ("singular endpoint",),
        figures=(at("r", pi / 4, 0.5, 1e-2),),
    ),
    Case(
        "A12", MIN, 5.068480110993416, 1e-5,
        "closed form: catenary x = lam + c cosh((t - t0)/c), c = 0.1636975295248336, t0 = 0.4100799412197036; "
        "problem of Cesari (1983), Optimization: Theory and Applications, pp. 126-127; Dolan, More, Munson "
        "(2004), ANL/MCS-TM-273, problem 4, prints 5.06891 (trapezoidal rule)",
        ("smooth", "isoperimetric"), figures=(at("x", 0.4100799412197036, 0.1547850936788329, 1e-4),),
    ),
    Case(
        "A13", MIN, -0.4540340636702465, 1e-6, CATENARY + ", 2c sinh(1/(2c)) = 1.5, c = 0.3082364697360404",
        ("smooth", "isoperimetric"), figures=(at("y", 0.5, -0.5026332616483152),),
    ),
    Case(
        "A14", MIN, 5.991796975802282, 1e-6, CATENARY + ", neck c = 0.848337938094979, area pi(c d + c^2 sinh(d/c))",
        ("smooth", "several optima"), figures=(at("y", 0, 0.848337938094979),),
    ),
    Case(
        "A16a", MAX, 1.325486838698363, 1e-6,
        "closed form: maximum of 2z/cosh z at z tanh z = 1, z = 1.199678640257734", ("smooth", "free end"),
        figures=(at("y", 0, 0.5524341245308832, 1e-4),),
    ),
    Case(
        "A16b", MAX, 1.055394793925143, 1e-6, "closed form: (z + sinh z cosh z)/cosh^2 z = 1",
        ("smooth", "free end", "isoperimetric"),
    ),
    Case(
        "A17", Sort.NOT_ATTAINED, 2 * pi, 1e-2,
        "closed form: no catenary beyond the distance 1.32549; infimum 2 pi, the two discs (Goldschmidt, 1831)",
        ("no minimiser",),
    ),
    Case(
        "A18", MAX, (pi / 3 - sqrt(3) / 2) / 2, 1e-6, "closed form: circular segment of radius 1 over 60 degrees",
        ("smooth", "isoperimetric"), figures=(at("y", 0.5, 1 - sqrt(3) / 2),),
    ),
    Case(
        "A19a", MAX, pi / 8, 1e-3, "closed form: half circle of radius 1/2", ("singular endpoint", "isoperimetric"),
        figures=(at("y", 0.5, 0.5, 1e-3),),
    ),
    Case(
        "A19b", MAX, pi / 8, 1e-6, "closed form: half circle of radius 1/2", ("smooth",),
        figures=(at("y", pi / 4, 0.5),),
    ),
    Case("A20a", MAX, pi, 1e-6, "closed form: unit circle", ("smooth", "guess given"), figures=(at("y", pi, 2.0),)),
    Case("A20b", MAX, pi, 1e-6, "closed form: unit circle", ("smooth", "isoperimetric"), figures=(at("r", 1, 1.0),)),
    Case(
        "A21", MIN, pi**2, 1e-6, "closed form: Rayleigh quotient, y = sqrt 2 sin(pi x)",
        ("smooth", "isoperimetric", "eigenvalue", "several optima"),
    ),
    Case(
        "A22", MIN, pi**2 / 4, 1e-6, "closed form: y = sqrt 2 sin(pi x/2)",
        ("smooth", "isoperimetric", "eigenvalue", "several optima", "free end"), figures=(at("y'", 1, 0.0),),
    ),
    Case(
        "A24", MIN, 5.783185962946785, 1e-6, "closed form: square of the first zero of the Bessel function J0",
        ("smooth", "isoperimetric", "eigenvalue", "several optima", "free end"),
    ),
    Case(
        "A25a", MIN, 500.5639017404326, 1e-6, "closed form: b^4 with cos b cosh b = 1, b = 4.730040744862704",
        ("smooth", "isoperimetric", "eigenvalue", "several optima", "higher order"),
    ),
    Case(
        "A25b", MIN, 12.36236336832619, 1e-6, "closed form: b^4 with cos b cosh b = -1, b = 1.875104068711961",
        ("smooth", "isoperimetric", "eigenvalue", "several optima", "higher order", "free end"),
    ),
    Case(
        "A26", MIN, 4 * pi**2, 1e-6, "closed form: y proportional to 1 - cos(2 pi x)",
        ("smooth", "isoperimetric", "eigenvalue", "several optima", "higher order"),
    ),
    Case(
        "A27", MIN, -5.790080598637771, 1e-6,
        "Abramowitz, Stegun (1964), Handbook of Mathematical Functions, ch. 20: b_1(5) = -5.79008060; more "
        "digits computed",
        ("smooth", "isoperimetric", "eigenvalue", "several optima"),
    ),
    Case(
        "A29", MIN, 8.322939529861928, 1e-6,
        "closed form: 2E/K - 1 = 0.8 at m = 0.1947313674677571, energy 32 K (E - (1 - m) K)",
        ("smooth", "isoperimetric", "several optima"),
    ),
    Case(
        "A30a", MIN, -1 / 240, 1e-6, "closed form: y'''' = 1", ("smooth", "higher order", "free end"),
        figures=(at("y", 0.5, 5 / 384, 1e-7),),
    ),
    Case(
        "A30b", MIN, -1 / 1440, 1e-6, "closed form: y'''' = 1", ("smooth", "higher order"),
        figures=(at("y", 0.5, 1 / 384, 1e-8),),
    ),
    Case(
        "A30c", MIN, -1 / 40, 1e-6, "closed form: y'''' = 1", ("smooth", "higher order", "free end"),
        figures=(at("y", 1, 1 / 8, 1e-6),),
    ),
    Case(
        "A31", MIN, 2.781245361209085, 1e-5, "closed form: law of refraction, sin a1 = 1.5 sin a2", ("corner", "arcs"),
        figures=(parameter("X", 0.6231997970978063), at("y", 0.6231997970978063, 0.0)),
    ),
    Case(
        "A32a", MIN, 0.9890426109960732, 1e-7,
        "closed form: parabola x = t cos a, y = -t sin a + t^2/4 at a = 15 degrees", ("smooth", "several optima"),
        figures=(at("y", 0.5, -0.06698729810778068),),
    ),
    Case(
        "A32b", Sort.STATIONARY, 1.460447131787105, 1e-7, "closed form: the same parabola at a = 75 degrees",
        ("several optima", "guess given"), figures=(at("y", 0.5, -0.9330127018922193),),
    ),
    Case(
        "A33", MIN, 0.374815987627636, 2e-3,
        "closed form: flat nose, then r = c(1 + p^2)^2/p, c = 0.08773564301210274; published 0.3748: Buttazzo, "
        "Kawohl (1993), On Newton's problem of minimal resistance, Math. Intelligencer 15",
        ("corner", "several optima"), figures=(at("z", 0.3, 0.0, 1e-2),),
    ),
    Case(
        "A35", MIN, 27 / 64, 1e-4, "closed form: y = x^(3/4)", ("singular endpoint",),
        figures=(at("y", 0.5, 0.5**0.75, 1e-3),),
    ),
    Case(
        "A36", MIN, 2 * sqrt(3) + pi / 3, 1e-5, "closed form: two tangents and an arc of 60 degrees",
        ("state constraint", "obstacle"), figures=(at("y", 0, 1.0),),
    ),
    Case(
        "A37", MIN, 0.2761423749153967, 1e-5, "closed form: 4a^3/3 + 4a^2(1 - a), contact for |x| <= a = 1 - 1/sqrt 2",
        ("state constraint", "obstacle"), figures=(at("y", 0, 0.5),),
    ),
    Case(
        "A38a", MIN, 12.0, 1e-6, "closed form: polynomial of degree 3", ("smooth", "higher order"),
        figures=(at("y'", 0.5, 1.5),),
    ),
    Case(
        "A38b", MIN, 720.0, 1e-6,
        "closed form: 10 t^3 - 15 t^4 + 6 t^5; Flash, Hogan (1985), The coordination of arm movements, J. Neurosci. 5",
        ("smooth", "higher order"), figures=(at("y'", 0.5, 1.875),),
    ),
    Case(
        "A38c", MIN, 100800.0, 1e-6, "closed form: polynomial of degree 7", ("smooth", "higher order"),
        figures=(at("y'", 0.5, 2.1875),),
    ),
    Case(
        "A40", MIN, 62962.05511181345, 1e-6,
        "closed form: spline of degree 7, all digits from its linear equations; method of Mellinger, Kumar "
        "(2011), Minimum snap trajectory generation and control for quadrotors, ICRA",
        ("smooth", "higher order", "way points"),
        figures=(at("y", 0.5, 0.3090215274215628), at("y", 1.5, -0.2951371492985972), at("y'", 1, -0.3144504872667079)),
    ),
    Case(
        "A41", MIN, 25.6, 1e-6, "closed form: natural cubic spline",
        ("smooth", "higher order", "way points", "free end"), figures=(at("y", 0.5, 0.775), at("y'", 1, -7 / 15)),
    ),
    Case(
        "A42", MIN, 20.0, 1e-6, "closed form: y = (5/3) t^3 - (5/6) t^4 + (1/6) t^5",
        ("smooth", "higher order", "free end"), figures=(at("y'", 1, 2.5), at("y''", 1, 10 / 3)),
    ),
    Case(
        "A43", MIN, -(1 - tanh(1)) / 2, 1e-6, "closed form: y = 1 - cosh(1 - x)/cosh 1", ("smooth", "free end"),
        figures=(at("y", 1, 1 - 1 / cosh(1)), at("y'", 1, 0.0)),
    ),
    Case(
        "A44", MIN, -(1 - exp(-2)) / 4, 1e-6, "closed form: y = sinh(x)/e", ("smooth", "free end"),
        figures=(at("y", 1, exp(-1) * sinh(1)),),
    ),
    Case(
        "A45", MIN, 0.0, 1e-6, "closed form: y = max(0, x); Bolza (1904), Lectures on the Calculus of Variations",
        ("corner", "several optima"),
    ),
    Case(
        "A46", MIN, 0.0, 1e-6, "closed form: every zigzag of slopes 1 and -1 with mean 1/2",
        ("corner", "several optima"),
    ),
    Case(
        "A46b", MIN, 1.0, 1e-6,
        "closed form: slopes 1, then -1 (corner condition: Erdmann, 1877); 1 is added to the integrand",
        ("corner", "arcs"), figures=(parameter("c", 0.75), at("y", 0.5, 0.5), at("y'", 0.9, -1.0)),
    ),
    Case(
        "A47", MIN, 2 * sqrt(2), 1e-6, "closed form: mirror image", ("corner", "arcs"),
        figures=(parameter("p", 1.0, 1e-4),),
    ),
    Case(
        "A48", MIN, 1 / tan(2) / 2, 1e-6, "closed form: y = sin t/sin 2", ("smooth",),
        figures=(at("y", 1, sin(1) / sin(2)),),
    ),
    Case(
        "A49a", Sort.STATIONARY, 1 / tan(4) / 2, 1e-6, "closed form: y = sin t/sin 4, conjugate point at pi < 4",
        ("no minimiser",), figures=(at("y", 2, sin(2) / sin(4)),),
    ),
    Case(
        "A49b", Sort.UNBOUNDED, None, 1e-6, "closed form: second variation pi^2/16 - 1 < 0 along sin(pi t/4)",
        ("no minimiser",),
    ),
    Case(
        "A50a", Sort.UNBOUNDED, None, 1e-6, "closed form: Legendre's condition is violated everywhere",
        ("no minimiser",),
    ),
    Case("A50b", Sort.NOT_ATTAINED, -1.0, 1e-6, "closed form: ever finer zigzags of slope 1 and -1", ("no minimiser",)),
    Case(
        "A51", Sort.NOT_ATTAINED, 0.0, 1e-6,
        "closed form: zigzags; Dacorogna (1989), Direct Methods in the Calculus of Variations", ("no minimiser",),
    ),
    Case(
        "A52", Sort.NOT_ATTAINED, 0.0, 1e-6, "closed form: y = atan(x/e)/atan(1/e), e -> 0 (Weierstrass, 1870)",
        ("no minimiser",),
    ),
    Case(
        "A53", Sort.GAP, 0.0, 1e-6,
        "closed form: infimum 0 of y = x^(1/3), with a gap to curves of bounded slope; Mania (1934); Cesari (1983), "
        "Optimization: Theory and Applications, sec. 18.5",
        ("singular endpoint", "several optima"),
    ),
    Case(
        "A54", MAX, 4 * pi**2 / 3, 1e-3,
        "closed form: A = (4/3) sin^2 t; Keller (1960), The shape of the strongest column, Arch. Rat. Mech. Anal. 5",
        ("singular endpoint", "eigenvalue"), figures=(at("A", 0.5, 4 / 3, 1e-2),),
    ),
    Case(
        "A55", MAX, 12.0, 1e-3, "closed form: A = 6x(1 - x)", ("singular endpoint", "eigenvalue"),
        figures=(at("A", 0.5, 1.5, 1e-2),),
    ),
    Case("A56a", MIN, 4 / 3, 1e-4, FIN, ("singular endpoint", "free end"), figures=(at("y", 0, 2.0, 1e-2),)),
    Case("A56b", MIN, 4 / 3, 1e-4, FIN, ("singular endpoint", "free end"), figures=(at("y", 0, 2.0, 1e-2),)),
    Case(
        "A57", MIN, 19 / (4 * sqrt(2)), 1e-6, "closed form: feet (1/2, 1/4) and (2.875, -2.125)",
        ("smooth", "moving end"), figures=(parameter("a", 0.5, 1e-4), parameter("b", 2.875, 1e-4)),
    ),
    Case(
        "A58", MAX, 52.3563, 1e-3,
        "Olhoff, Rasmussen (1977), On single and bimodal optimum buckling loads of clamped columns, Int. J. "
        "Solids Struct. 13, 605-614 (from memory); recomputed by finite elements to 6 digits. 16 pi^2/3 of "
        "Tadjbakhsh, Keller (1962) is not attainable",
        ("eigenvalue", "guess given"), known_to=1e-4, figures=(at("A", 0, 1.333, 2e-2), at("A", 0.5, 1.334, 2e-2)),
    ),
)  # fmt: skip
