"""The general solution against closed forms, a boundary-value solver and heat balance; what is kept."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from fin_shapes import (
    ALL,
    BLUNT,
    CLOSED,
    GUARDED,
    LENGTH,
    OTHER_BLUNT,
    ROUND,
    SHARP,
    base_ratio,
    coefficient,
)
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_bvp

from finback.models import (
    AdiabaticTip,
    Annular,
    BaseTemperature,
    ConcaveParabolic,
    ConcavePin,
    Cone,
    ConvectiveTip,
    ConvexParabolic,
    ConvexPin,
    Fin,
    FixedTip,
    HyperbolicAnnular,
    Joint,
    Table,
    Trapezoidal,
    Triangular,
    Uniform,
    UniformCoefficient,
    bessel_forms,
    closed_form,
    efficiency,
    general,
    pin,
    solve,
)

K, EXCESS = 150.0, 75.0
FREE = {"adiabatic": AdiabaticTip(), "side": ConvectiveTip(), "own": ConvectiveTip(700.0)}
TIPS = FREE | {"strong": ConvectiveTip(1e7), "fixed": FixedTip(25.0), "fixed cold": FixedTip(0.0)}
BASES = {"temperature": BaseTemperature(EXCESS), "joint": Joint(EXCESS, 1e-4)}
FIELDS = ("temperatures", "base_temperature", "base_heat", "tip_temperature", "tip_heat")
X = LENGTH * np.array([0.0, 1e-4, 0.03, 0.2, 0.5, 0.8, 0.97, 0.999])
NOWHERE = np.array([])


def run(profile, tip, mL, base=BASES["temperature"], x=X, **keywords):
    fin = Fin(profile, K, UniformCoefficient(coefficient(profile, mL, K)), tip)
    return general.solve(fin, base, 0.0, x, **keywords)


# --- closed forms ---------------------------------------------------------------------------------


def exact(profile, tip, mL, base, x=X):
    solver = closed_form if isinstance(profile, Uniform) else bessel_forms
    return solver.solve(Fin(profile, K, UniformCoefficient(coefficient(profile, mL, K)), tip), base, 0.0, x)


def assert_agree(one, other, accuracy):
    for name in ("temperatures", "base_temperature", "tip_temperature"):
        assert getattr(one, name) == pytest.approx(getattr(other, name), rel=0, abs=accuracy * EXCESS), name
    assert one.base_heat == pytest.approx(other.base_heat, rel=accuracy)
    flow = np.maximum(np.abs(other.base_heat), np.abs(other.tip_heat))
    # Through a tip face goes as much as its temperature says: that is exact to a share of the base's.
    full = EXCESS * np.divide(
        other.tip_heat, other.tip_temperature, out=flow * 0, where=other.tip_temperature > 0
    )
    assert np.all(np.abs(one.tip_heat - other.tip_heat) <= accuracy * np.maximum(flow, full))


@pytest.mark.parametrize("tip", TIPS.values(), ids=TIPS)
@pytest.mark.parametrize("shape", [*CLOSED, "pin"])
def test_agrees_with_the_closed_form(shape, tip):
    if shape in SHARP and isinstance(tip, FixedTip):
        return
    for top in (0.1, 10.0, 200.0):
        mL = np.geomspace(1.01e-6, top, 25)
        for accuracy, base in (
            (2e-6, "temperature"),
            (general.ACCURACY, "joint"),
            (general.ACCURACY, "temperature"),
        ):
            found = run(ALL[shape], tip, mL, BASES[base], accuracy=accuracy)
            assert_agree(found, exact(ALL[shape], tip, mL, BASES[base]), accuracy)


LONG = ("pin", "trapezoidal", "thin-tipped cone", "wide annular", "hyperbolic annular", "cone", "concave pin")


@pytest.mark.parametrize("tip", [AdiabaticTip(), ConvectiveTip(), FixedTip(25.0)], ids=repr)
@pytest.mark.parametrize("shape", LONG)
def test_a_very_long_fin_agrees_with_the_closed_form(shape, tip):
    if shape in SHARP and isinstance(tip, FixedTip):
        return
    mL = np.geomspace(2.0, 1e4, 25)
    found = run(ALL[shape], tip, mL, BASES["joint"])
    assert_agree(found, exact(ALL[shape], tip, mL, BASES["joint"]), 2e-8)


@pytest.mark.parametrize("shape", LONG)
def test_beyond_what_is_resolved_a_fin_goes_on_as_an_endless_one(shape):
    mL = np.array([3e5, 2e6, 1e7])
    for tip in (AdiabaticTip(), ConvectiveTip()):
        found, expected = run(ALL[shape], tip, mL), exact(ALL[shape], tip, mL, BASES["temperature"])
        assert found.base_heat == pytest.approx(expected.base_heat, rel=1e-8)
        assert np.abs(found.temperatures[:, 2:]).max() < 1e-8 * EXCESS


@pytest.mark.parametrize("shape", SHARP)
def test_the_very_tip_of_a_sharp_fin(shape):
    """At the tip itself a concave parabola has the air's temperature, any other shape a regular one."""
    mL, tip = np.array([0.05, 1.0, 8.0]), AdiabaticTip()
    found = run(SHARP[shape], tip, mL, x=np.array([LENGTH]))
    expected = exact(SHARP[shape], tip, mL, BASES["temperature"], np.array([LENGTH]))
    assert found.temperatures[:, 0] == pytest.approx(expected.temperatures[:, 0], abs=1e-9 * EXCESS)
    assert found.tip_temperature == pytest.approx(expected.tip_temperature, abs=1e-9 * EXCESS)
    assert np.all((found.tip_temperature == 0) == ("concave" in shape))
    assert np.all(found.tip_heat == 0)


def test_without_loss_the_very_tip_is_as_warm_as_the_base():
    fin = Fin(SHARP["concave pin"], K, UniformCoefficient(0.0), AdiabaticTip())
    solution = solve(fin, BASES["joint"], 0.0, np.array([0.0, LENGTH]))
    assert solution.temperatures == pytest.approx(EXCESS)
    assert solution.tip_temperature == pytest.approx(EXCESS)


# --- two uniform halves ---------------------------------------------------------------------------


@pytest.mark.parametrize("tip", TIPS.values(), ids=TIPS)
@pytest.mark.parametrize("jump", [0.002, 0.02, 0.0499])
def test_a_turned_shaft_is_a_pin_on_a_pin(tip, jump):
    """The thin part alone tells by its closed form what coefficient it puts on the end of the thick one."""
    thick, thin = pin(jump, 6e-3), pin(LENGTH - jump, 3e-3)
    areas, perimeters = (
        [part for part in pair for _ in (0, 1)]
        for pair in (
            (thick.section_area, thin.section_area),
            (thick.section_perimeter, thin.section_perimeter),
        )
    )
    shaft = Table([0, jump, jump, LENGTH], areas, perimeters)
    for h in (1e-4, 40.0, 1e4):
        whole = solve(Fin(shaft, K, UniformCoefficient(h), tip), BASES["joint"], 0.0, np.array([jump]))
        middle = float(whole.temperatures[0, 0])
        outer = solve(Fin(thin, K, UniformCoefficient(h), tip), BaseTemperature(middle), 0.0, NOWHERE)
        stand_in = ConvectiveTip(float(outer.base_heat[0]) / (thick.section_area * middle))
        inner = solve(Fin(thick, K, UniformCoefficient(h), stand_in), BASES["joint"], 0.0, NOWHERE)
        assert inner.tip_temperature == pytest.approx([middle], abs=1e-9 * EXCESS)
        assert inner.base_heat == pytest.approx(whole.base_heat, rel=1e-8)
        assert outer.tip_temperature == pytest.approx(whole.tip_temperature, abs=1e-9 * EXCESS)


def test_a_table_that_follows_a_shape_is_that_shape():
    cone = Cone(**ROUND, tip_diameter=0.002)
    found = []
    for n in (26, 101):
        rows = np.linspace(0, LENGTH, n)
        table = Table(rows, cone.area(rows), cone.perimeter(rows))
        found.append(run(table, ConvectiveTip(), 1.3).base_heat[0])
    exactly = run(cone, ConvectiveTip(), 1.3).base_heat[0]
    assert found[0] == pytest.approx(exactly, rel=1e-4)
    assert abs(found[1] - exactly) < abs(found[0] - exactly) / 12  # straight lines: an error of second order


def test_a_jump_that_is_not_told_of_is_found():
    """The same shaft as a class of its own, without breaks."""

    class Shaft:
        length = LENGTH

        def area(self, x):
            return np.where(x < 0.0137, 3e-5, 1e-5)

        def perimeter(self, x):
            return np.where(x < 0.0137, 0.02, 0.012)

        def side_area(self):
            return 0.0137 * 0.02 + (LENGTH - 0.0137) * 0.012

    told = Table([0, 0.0137, 0.0137, LENGTH], [3e-5, 3e-5, 1e-5, 1e-5], [0.02, 0.02, 0.012, 0.012])
    for tip in (AdiabaticTip(), ConvectiveTip(), FixedTip(20.0)):
        one, other = (run(shape, tip, np.array([0.3, 4.0])) for shape in (Shaft(), told))
        assert_agree(one, other, 2e-8)


# --- scipy's boundary-value solver ----------------------------------------------------------------


def log_uniform(low, high):
    return st.floats(np.log(low), np.log(high)).map(lambda value: float(np.exp(value)))


@st.composite
def profiles(draw):
    """Draw a tapered or annular fin with a blunt tip, about 0.05 m long."""
    length, size, taper = (
        draw(log_uniform(0.01, 0.2)),
        draw(log_uniform(1e-3, 2e-2)),
        draw(st.floats(0.15, 1.4)),
    )
    exposed = {"guarded_edges": draw(st.booleans()), "slant_surface": draw(st.booleans())}
    inner = draw(log_uniform(5e-3, 0.2))
    rows = draw(st.lists(st.floats(0.3, 1.5), min_size=2, max_size=4))
    d = size * np.array([1.0, *rows])
    return {
        "trapezoidal": lambda: Trapezoidal(
            length, draw(log_uniform(0.01, 1.0)), size, taper * size, **exposed
        ),
        "cone": lambda: Cone(length, size, taper * size, slant_surface=draw(st.booleans())),
        "annular": lambda: Annular(inner, inner + 2 * length, size),
        "hyperbolic": lambda: HyperbolicAnnular(
            inner, inner + 2 * length, size, slant_surface=draw(st.booleans())
        ),
        "table": lambda: Table(np.linspace(0, length, len(d)), np.pi / 4 * d**2, np.pi * d),
    }[draw(st.sampled_from(("trapezoidal", "cone", "annular", "hyperbolic", "table")))]()


@st.composite
def cases(draw, smallest, largest, shapes):
    """Draw a fin of m L between two values, its base and tip; temperatures counted from the air's."""
    profile, k = draw(shapes), draw(log_uniform(0.1, 500.0))
    h = float(coefficient(profile, draw(log_uniform(smallest, largest)), k))
    tip_area = float(profile.area(np.array([profile.length]))[0])
    tips = ["adiabatic", "side", "own", *(["fixed"] if tip_area > 0 else [])]
    tip = {
        "adiabatic": lambda: AdiabaticTip(),
        "side": lambda: ConvectiveTip(),
        "own": lambda: ConvectiveTip(draw(log_uniform(1e-3, 1e3)) * k / profile.length),
        "fixed": lambda: FixedTip(draw(st.floats(-50.0, 150.0))),
    }[draw(st.sampled_from(tips))]()
    joint = Joint(EXCESS, draw(log_uniform(1e-3, 1e2)) * profile.length / k)
    return Fin(profile, k, UniformCoefficient(h), tip), draw(st.sampled_from((BASES["temperature"], joint)))


def by_boundary_values(fin, base, places):
    """Return excess temperatures and base heat from scipy's collocation solver.

    Dimensionless: y = (theta, fall) with x over the length and A over that of the base.
    """
    profile, length, k = fin.profile, fin.profile.length, fin.conductivity
    area = float(profile.area(np.zeros(1))[0])
    ratio = fin.surface.coefficient / k * length**2 / area
    bond = base.resistance * k / length if isinstance(base, Joint) else 0.0
    tip_area = float(profile.area(np.array([length]))[0]) / area
    held = fin.tip.temperature / EXCESS if isinstance(fin.tip, FixedTip) else None
    strength = 0.0
    if isinstance(fin.tip, ConvectiveTip):
        own = fin.tip.coefficient
        strength = (fin.surface.coefficient if own is None else own) * length / k * tip_area

    def slopes(x, y):
        return np.stack(
            [-y[1] * area / profile.area(x * length), -ratio * profile.perimeter(x * length) * y[0]]
        )

    def ends(ya, yb):
        far = yb[0] - held if held is not None else (yb[1] - strength * yb[0]) / (1 + strength)
        return np.array([(ya[0] + bond * ya[1] - 1.0) / (1 + bond), far])

    breaks = getattr(profile, "breaks", np.array([])) / length
    grid = np.linspace(0, 1, 161)
    grid = grid[np.abs(grid[:, None] - breaks).min(axis=1, initial=1.0) > 1e-3]
    mesh = np.unique(np.concatenate([[0.0, 1.0], grid, breaks]))
    found = solve_bvp(slopes, ends, mesh, np.zeros((2, mesh.size)), tol=1e-8, bc_tol=1e-10, max_nodes=40_000)
    assert found.success, found.message
    y = found.sol(places / length)
    return EXCESS * y[0], EXCESS * k * area / length * float(found.sol(0.0)[1])


@settings(deadline=None, max_examples=40)
@given(cases(1e-2, 8.0, profiles()))
def test_agrees_with_a_boundary_value_solver(case):
    fin, base = case
    x = np.linspace(0, fin.profile.length, 7)
    excess, heat = by_boundary_values(fin, base, x)
    solution = solve(fin, base, 0.0, x)
    scale = max(EXCESS, float(np.abs(excess).max()))
    assert solution.temperatures[0] == pytest.approx(excess, rel=0, abs=1e-6 * scale)
    steepest = fin.conductivity * float(fin.profile.area(np.zeros(1))[0]) / fin.profile.length * scale
    assert solution.base_heat[0] == pytest.approx(heat, rel=1e-6, abs=1e-7 * steepest)


# --- what goes in comes out -----------------------------------------------------------------------


@st.composite
def any_profile(draw):
    """Draw a fin of any shape, sharp ones included, with jumps in its table."""
    if draw(st.booleans()):
        return draw(profiles())
    length, size = draw(log_uniform(0.01, 0.2)), draw(log_uniform(1e-3, 2e-2))
    shape = draw(
        st.sampled_from((Triangular, ConcaveParabolic, ConvexParabolic, Cone, ConcavePin, ConvexPin, Table))
    )
    if shape is Table:
        d = size * np.array(
            [1.0, draw(st.floats(0.2, 2.0)), draw(st.floats(0.2, 2.0)), draw(st.floats(0.2, 2.0))]
        )
        at = length * draw(st.floats(0.02, 0.98))
        return Table([0, at, at, length], np.pi / 4 * d**2, np.pi * d)
    if issubclass(shape, Triangular | ConcaveParabolic | ConvexParabolic):
        return shape(length, draw(log_uniform(0.01, 1.0)), size, guarded_edges=draw(st.booleans()))
    return shape(length, size, slant_surface=draw(st.booleans()))


def side_loss(fin, base, solver):
    """Integrate h P theta by Gauss-Legendre over panels that shrink by halves towards ends and breaks."""
    length = fin.profile.length
    marks = [0.0, *np.asarray(getattr(fin.profile, "breaks", ())).tolist(), length]
    halves = 0.5 ** np.arange(1, 34)[::-1]
    relative = np.concatenate([[0.0], halves, 1 - halves[-2::-1], [1.0]])
    total = 0.0
    nodes, weights = np.polynomial.legendre.leggauss(24)
    for start, end in pairwise(marks):
        edges = start + (end - start) * relative
        half = np.diff(edges)[:, None] / 2
        x = edges[:-1, None] + half * (1 + nodes)
        theta = solver(fin, base, 0.0, x.ravel()).temperatures[0].reshape(x.shape)
        total += float(np.sum(half * weights * theta * fin.profile.perimeter(x.ravel()).reshape(x.shape)))
    return fin.surface.coefficient * total


def assert_balanced(fin, base, solver):
    solution = solver(fin, base, 0.0, NOWHERE)
    into, out, side = float(solution.base_heat[0]), float(solution.tip_heat[0]), side_loss(fin, base, solver)
    assert into - out == pytest.approx(side, rel=0, abs=1e-8 * max(abs(into), abs(out), abs(side)))


@settings(deadline=None, max_examples=60)
@given(cases(1e-6, 1e4, any_profile()))
def test_base_heat_is_side_loss_and_tip_heat(case):
    assert_balanced(*case, general.solve)
    assert_balanced(*case, solve)


@pytest.mark.parametrize("tip", [AdiabaticTip(), ConvectiveTip(), FixedTip(30.0)], ids=repr)
@pytest.mark.parametrize("shape", ALL)
def test_heat_through_joint_and_tip_face(shape, tip):
    profile = ALL[shape]
    base_area, tip_area = profile.area(np.array([0.0, LENGTH]))
    if tip_area == 0 and isinstance(tip, FixedTip):
        return
    for mL in (1e-6, 0.5, 7.0):
        solution = run(profile, tip, mL, BASES["joint"])
        drop = solution.base_heat[0] * BASES["joint"].resistance / base_area
        assert drop == pytest.approx(EXCESS - solution.base_temperature[0], rel=1e-9, abs=1e-12)
        if isinstance(tip, ConvectiveTip):
            h = float(coefficient(profile, mL, K))
            assert solution.tip_heat == pytest.approx(h * tip_area * solution.tip_temperature, rel=1e-12)


# --- limits and extremes --------------------------------------------------------------------------


@pytest.mark.parametrize("shape", ALL)
def test_a_short_fin_is_isothermal_and_loses_from_all_its_side(shape):
    profile = ALL[shape]
    for tip in (AdiabaticTip(), ConvectiveTip()):
        for mL in (1e-100, 1e-6):
            fin = Fin(profile, K, UniformCoefficient(coefficient(profile, mL, K)), tip)
            solution = general.solve(fin, BASES["temperature"], 0.0, X)
            assert solution.temperatures == pytest.approx(EXCESS, rel=1e-9)
            assert efficiency(fin, solution, 0.0) == pytest.approx([1.0], rel=1e-9)


EXTREME = ("trapezoidal", "hyperbolic annular", "cone", "turned shaft", "slant convex", "slant concave pin")


@pytest.mark.parametrize("shape", EXTREME)
def test_every_value_is_finite_falls_along_the_fin_and_no_warning_is_given(shape):
    profile = ALL[shape]
    mL = np.array([0.0, 1e-300, 1e-160, 1e-20, 1e-8, 1e-3, 0.5, 5.0, 40.0, 355.0, 711.0, 1e4, 1e6, 1e20])
    resistance = np.array([0.0, 1e-12, 1e-6, 1e-3, 1.0, 1e6])
    mL, resistance = (grid.ravel() for grid in np.meshgrid(mL, resistance))
    x = np.linspace(0, LENGTH, 9)
    for tip in (ConvectiveTip(), FREE["own"]):
        with np.errstate(over="raise", invalid="raise", divide="raise"):
            solution = run(profile, tip, mL, Joint(EXCESS, resistance), x)
        for name in FIELDS:
            assert np.all(np.isfinite(getattr(solution, name))), name
        assert np.all(solution.temperatures > -2e-8 * EXCESS)
        assert np.all(np.diff(solution.temperatures, axis=1) < 2e-8 * EXCESS)
        assert np.all(solution.base_heat >= 0)


@pytest.mark.parametrize(
    "shape", ["exposed triangular", "slant concave", "turned shaft", "flared", "slant cone"]
)
def test_more_coefficient_is_more_heat_and_less_efficiency(shape):
    mL = np.geomspace(1e-4, 1e4, 81)
    fin = Fin(ALL[shape], K, UniformCoefficient(coefficient(ALL[shape], mL, K)), AdiabaticTip())
    solution = general.solve(fin, BASES["temperature"], 0.0, NOWHERE)
    assert np.all(np.diff(solution.base_heat) > 0)
    assert np.all(np.diff(efficiency(fin, solution, 0.0)[10:]) < 0)


@pytest.mark.parametrize("shape", OTHER_BLUNT | BLUNT)
def test_tips_meet_at_their_limits(shape):
    profile, mL = ALL[shape], np.array([0.02, 1.5, 9.0])
    h = coefficient(profile, mL, K)
    pairs = (
        (ConvectiveTip(0.0), AdiabaticTip()),
        (ConvectiveTip(h), ConvectiveTip()),
        (ConvectiveTip(1e30), FixedTip(0.0)),
    )
    for one, other in pairs:
        assert_agree(run(profile, one, mL, BASES["joint"]), run(profile, other, mL, BASES["joint"]), 2e-9)


def test_slant_and_exposed_surfaces_lose_more():
    plain = Triangular(**GUARDED)
    heats = [
        run(shape, AdiabaticTip(), 0.3).base_heat[0] / coefficient(shape, 0.3, K)
        for shape in (plain, replace(plain, slant_surface=True), replace(plain, guarded_edges=False))
    ]
    assert heats[1] / heats[0] == pytest.approx(np.hypot(1, 0.002 / LENGTH), rel=1e-4)
    assert heats[2] > heats[0]


# --- blocks, positions, what is kept --------------------------------------------------------------


@pytest.mark.parametrize("tip", TIPS.values(), ids=TIPS)
@pytest.mark.parametrize("shape", ["exposed trapezoidal", "turned shaft"])
def test_a_block_is_its_sets_one_by_one(shape, tip):
    rng = np.random.default_rng(20240711)
    n = 2500  # more than are summed at a time
    h, k, air = rng.uniform(5, 500, n), rng.uniform(50, 400, n), rng.uniform(280, 300, n)
    plate, resistance = rng.uniform(350, 400, n), rng.uniform(0, 1e-3, n)
    tip = FixedTip(rng.uniform(300, 340, n)) if isinstance(tip, FixedTip) else tip
    block = solve(Fin(ALL[shape], k, UniformCoefficient(h), tip), Joint(plate, resistance), air, X)
    assert block.temperatures.shape == (n, X.size)
    for row in (0, general.BLOCK - 1, general.BLOCK, n - 1):
        own = FixedTip(float(tip.temperature[row])) if isinstance(tip, FixedTip) else tip
        fin = Fin(ALL[shape], float(k[row]), UniformCoefficient(float(h[row])), own)
        single = solve(fin, Joint(float(plate[row]), float(resistance[row])), float(air[row]), X)
        for name in FIELDS:
            assert getattr(block, name)[row] == pytest.approx(getattr(single, name)[0], rel=3e-9), name


@pytest.mark.parametrize("kind", TIPS)
def test_any_value_may_be_a_number_or_an_array(kind):
    values = {"k": 150.0, "h": 40.0, "air": 290.0, "plate": 370.0, "resistance": 2e-4, "tip": 320.0}

    def solved(values):
        tip = TIPS[kind]
        if kind.startswith("fixed"):
            tip = FixedTip(values["tip"])
        elif kind == "own":
            tip = ConvectiveTip(values["tip"])
        fin = Fin(ALL["exposed trapezoidal"], values["k"], UniformCoefficient(values["h"]), tip)
        return general.solve(fin, Joint(values["plate"], values["resistance"]), values["air"], X)

    reference = solved(values)
    for name in values:
        if name == "tip" and not (kind == "own" or kind.startswith("fixed")):
            continue
        mixed = solved(values | {name: np.full(3, values[name])})
        for field in FIELDS:
            assert len(getattr(mixed, field)) == 3, (name, field)
            assert getattr(mixed, field) == pytest.approx(
                np.repeat(getattr(reference, field), 3, axis=0), rel=1e-13
            )


@pytest.mark.parametrize("n_x", [0, 1, 4])
@pytest.mark.parametrize("kind", TIPS)
def test_shapes(kind, n_x):
    solution = run(ALL["turned shaft"], TIPS[kind], np.array([0.5, 2.0, 3.0]), x=np.linspace(0, LENGTH, n_x))
    assert solution.temperatures.shape == (3, n_x)
    assert {getattr(solution, name).shape for name in FIELDS[1:]} == {(3,)}
    assert {getattr(solution, name).dtype for name in FIELDS} == {np.dtype(np.float64)}


def test_a_set_that_is_no_number_spoils_no_other():
    mL = np.array([0.7, np.nan, 2.0])
    found, clean = (
        run(ALL["slant cone"], AdiabaticTip(), mL),
        run(ALL["slant cone"], AdiabaticTip(), mL[[0, 2]]),
    )
    assert np.isnan(found.base_heat).tolist() == [False, True, False]
    assert found.temperatures[[0, 2]] == pytest.approx(clean.temperatures, rel=1e-13)


def test_the_geometry_is_computed_once(monkeypatch):
    count = []
    find = general.find
    monkeypatch.setattr(general, "find", lambda *arguments: count.append(1) or find(*arguments))
    profile = Cone(length=0.0517, diameter=0.0061, slant_surface=True)  # a shape that no other test has
    fin = Fin(profile, K, UniformCoefficient(np.linspace(10.0, 60.0, 50)), ConvectiveTip())
    for x in (X, X, X[:3]):
        solve(fin, BASES["joint"], 290.0, x)
    solve(replace(fin, profile=replace(profile)), BASES["temperature"], 300.0, X)
    assert len(count) == 1
    solve(replace(fin, profile=replace(profile, diameter=0.0062)), BASES["joint"], 290.0, X)
    assert len(count) == 2


def test_a_shape_that_is_none_is_refused():
    class Wrong:
        length = LENGTH
        perimeter_value = 0.02
        area_value = 1e-5

        def area(self, x):
            return np.where(x > 0.04, self.area_value, 1e-5)

        def perimeter(self, x):
            return np.where(x > 0.04, self.perimeter_value, 0.02)

        def side_area(self):
            return 0.02 * LENGTH

    cut, hollow, endless = Wrong(), Wrong(), Wrong()
    cut.area_value, hollow.perimeter_value, endless.perimeter_value = 0.0, -0.01, np.inf
    for shape, sentence in (
        (cut, r"^area of Wrong must be finite and positive, got 0\.0 at 0\.04\d* m$"),
        (hollow, r"^perimeter of Wrong must be finite and not negative, got -0\.01 at 0\.04\d* m$"),
        (endless, r"^perimeter of Wrong must be finite and not negative, got inf at 0\.04\d* m$"),
    ):
        with pytest.raises(ValueError, match=sentence):
            run(shape, AdiabaticTip(), 1.0)


def test_a_length_without_loss_is_a_bar_between():
    """An insulated stretch between two that lose heat: in series, as closed forms of three pins have it."""
    d, ends = 6e-3, (0.02, 0.035)
    area, perimeter = np.pi * d**2 / 4, np.pi * d

    class Sleeve:
        length = LENGTH
        breaks = np.array(ends)

        def area(self, x):
            return np.full_like(x, area)

        def perimeter(self, x):
            return np.where((x > ends[0]) & (x < ends[1]), 0.0, perimeter)

        def side_area(self):
            return perimeter * (LENGTH - ends[1] + ends[0])

    h = 60.0
    stretches = [(LENGTH - ends[1], h), (ends[1] - ends[0], 0.0), (ends[0], h)]
    tip = ConvectiveTip(h)
    for length, loss in stretches:
        part = Fin(Uniform(length, area, perimeter), K, UniformCoefficient(loss), tip)
        heat = float(solve(part, BaseTemperature(1.0), 0.0, NOWHERE).base_heat[0])
        tip = ConvectiveTip(heat / area)
    found = solve(
        Fin(Sleeve(), K, UniformCoefficient(h), ConvectiveTip()), BaseTemperature(1.0), 0.0, NOWHERE
    )
    assert found.base_heat == pytest.approx([heat], rel=1e-9)


def test_the_ratio_of_perimeter_to_area_sets_m():
    assert base_ratio(ALL["pin"]) == pytest.approx(4 / ROUND["diameter"])
