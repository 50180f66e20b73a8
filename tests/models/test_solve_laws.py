"""Laws that every solution of the fin equation obeys, its limits, and the shapes of its values."""

from itertools import product

import numpy as np
import pytest

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    Cone,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    PowerCoefficient,
    Profile,
    SurfaceLaw,
    Uniform,
    UniformCoefficient,
    rectangular,
    solve,
)

PROFILE = rectangular(length=0.1, width=0.03, thickness=0.002)
LENGTH, AREA, PERIMETER = PROFILE.length, PROFILE.section_area, PROFILE.section_perimeter
K, H, AIR, PLATE, RESISTANCE = 150.0, 40.0, 295.0, 370.0, 2e-4
X = np.linspace(0.0, LENGTH, 11)
FIELDS = ("temperatures", "base_temperature", "base_heat", "tip_temperature", "tip_heat")
TIPS = {
    "adiabatic": AdiabaticTip(),
    "side": ConvectiveTip(),
    "own": ConvectiveTip(900.0),
    "fixed": FixedTip(320.0),
    "infinite": InfiniteTip(),
}
BASES = {"temperature": BaseTemperature(PLATE), "joint": Joint(PLATE, RESISTANCE)}
every_tip = pytest.mark.parametrize("tip", TIPS.values(), ids=TIPS)
every_base = pytest.mark.parametrize("base", BASES.values(), ids=BASES)


def run(tip, base, *, profile=PROFILE, k=K, h=H, air=AIR, x=X):
    return solve(Fin(profile, k, UniformCoefficient(h), tip), base, air, x)


def coefficient_for(mL, k=K):
    return (mL / LENGTH) ** 2 * k * AREA / PERIMETER


def assert_same(one, other, rel=1e-12):
    for name in FIELDS:
        assert getattr(one, name) == pytest.approx(getattr(other, name), rel=rel, abs=1e-11), name


# --- scaling, superposition, symmetry -------------------------------------------------------------


@every_base
@every_tip
def test_temperatures_depend_on_the_ratio_of_coefficient_and_conductivity(tip, base):
    c = 3.7
    one = run(tip, base)
    other = run(
        ConvectiveTip(tip.coefficient * c) if tip == TIPS["own"] else tip,
        Joint(PLATE, RESISTANCE / c) if isinstance(base, Joint) else base,
        k=K * c,
        h=H * c,
    )
    assert other.temperatures == pytest.approx(one.temperatures, rel=1e-13)
    assert other.base_heat == pytest.approx(c * one.base_heat, rel=1e-12)
    assert other.tip_heat == pytest.approx(c * one.tip_heat, rel=1e-12)


@every_base
@every_tip
def test_a_model_to_scale_has_the_same_temperatures(tip, base):
    c = 0.4
    smaller = Uniform(LENGTH * c, AREA * c**2, PERIMETER * c)
    one = run(tip, base)
    other = run(
        ConvectiveTip(tip.coefficient / c) if tip == TIPS["own"] else tip,
        Joint(PLATE, RESISTANCE * c) if isinstance(base, Joint) else base,
        profile=smaller,
        h=H / c,
        x=X * c,
    )
    assert other.temperatures == pytest.approx(one.temperatures, rel=1e-13)
    assert other.base_heat == pytest.approx(c * one.base_heat, rel=1e-12)
    assert other.tip_heat == pytest.approx(c * one.tip_heat, rel=1e-12)


@pytest.mark.parametrize("resistance", [0.0, RESISTANCE])
def test_causes_add_up(resistance):
    def excess(base, tip):
        return run(FixedTip(tip), Joint(base, resistance), air=0.0)

    both, hot_base, hot_tip = excess(75.0, 25.0), excess(75.0, 0.0), excess(0.0, 25.0)
    for name in FIELDS:
        total = getattr(hot_base, name) + getattr(hot_tip, name)
        assert getattr(both, name) == pytest.approx(total, rel=1e-12, abs=1e-13), name


@every_base
@every_tip
def test_a_cold_fin_mirrors_a_hot_one(tip, base):
    cold_tip = FixedTip(2 * AIR - tip.temperature) if isinstance(tip, FixedTip) else tip
    mirrored = 2 * AIR - PLATE
    cold_base = Joint(mirrored, RESISTANCE) if isinstance(base, Joint) else BaseTemperature(mirrored)
    hot, cold = run(tip, base), run(cold_tip, cold_base)
    assert cold.temperatures - AIR == pytest.approx(AIR - hot.temperatures, abs=1e-11)
    assert cold.base_heat == pytest.approx(-hot.base_heat, rel=1e-12)
    assert cold.tip_heat == pytest.approx(-hot.tip_heat, rel=1e-12)


@every_base
@every_tip
def test_the_zero_of_temperature_does_not_matter(tip, base):
    shift = 273.15
    shifted_tip = FixedTip(tip.temperature - shift) if isinstance(tip, FixedTip) else tip
    celsius = PLATE - shift
    shifted_base = Joint(celsius, RESISTANCE) if isinstance(base, Joint) else BaseTemperature(celsius)
    kelvin, other = run(tip, base), run(shifted_tip, shifted_base, air=AIR - shift)
    assert other.temperatures + shift == pytest.approx(kelvin.temperatures, abs=1e-11)
    assert other.base_heat == pytest.approx(kelvin.base_heat, rel=1e-12)


def test_a_fin_held_at_both_ends_can_be_turned_round():
    there = run(FixedTip(320.0), BaseTemperature(PLATE))
    back = run(FixedTip(PLATE), BaseTemperature(320.0))
    assert back.temperatures[0, ::-1] == pytest.approx(there.temperatures[0], abs=1e-11)
    assert back.base_heat == pytest.approx(-there.tip_heat, rel=1e-12)
    assert back.tip_heat == pytest.approx(-there.base_heat, rel=1e-12)


@every_base
@every_tip
def test_the_outer_half_is_the_tip_of_the_inner_one(tip, base):
    half = Uniform(LENGTH / 2, AREA, PERIMETER)
    whole = run(tip, base)
    middle = run(tip, base, x=np.array([LENGTH / 2])).temperatures[0, 0]
    outer = run(tip, BaseTemperature(middle), profile=half, x=X[:6])
    stand_in = ConvectiveTip(outer.base_heat[0] / (AREA * (middle - AIR)))
    inner = run(stand_in, base, profile=half, x=X[:6])
    assert inner.temperatures[0] == pytest.approx(whole.temperatures[0, :6], abs=1e-11)
    assert outer.temperatures[0] == pytest.approx(whole.temperatures[0, 5:], abs=1e-11)
    assert inner.base_heat == pytest.approx(whole.base_heat, rel=1e-12)


@every_base
@every_tip
def test_temperatures_sag_between_the_ends(tip, base):
    temperatures = run(tip, base).temperatures[0]
    assert np.all(np.diff(temperatures, 2) > 0)  # theta'' = m² theta > 0
    assert PLATE >= temperatures[0] > temperatures[-1] > AIR
    if not isinstance(tip, FixedTip):  # nothing but the base heats it
        assert np.all(np.diff(temperatures) < 0)


@every_base
@every_tip
def test_end_temperatures_are_those_of_the_profile(tip, base):
    solution = run(tip, base)
    assert solution.base_temperature == pytest.approx(solution.temperatures[:, 0], rel=1e-14)
    assert solution.tip_temperature == pytest.approx(solution.temperatures[:, -1], rel=1e-14)


# --- limits ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("mL", [1e-200, 1e-13, 1e-6])
def test_a_short_fin_is_isothermal(mL):
    h = coefficient_for(mL)
    solution = run(AdiabaticTip(), BaseTemperature(PLATE), h=h)
    assert solution.temperatures == pytest.approx(np.full((1, X.size), PLATE), rel=1e-12)
    assert solution.base_heat == pytest.approx(h * PERIMETER * LENGTH * (PLATE - AIR), rel=1e-11, abs=1e-290)


@pytest.mark.parametrize("mL", [0.0, 1e-13, 1e-6])
def test_a_short_fin_held_at_both_ends_conducts(mL):
    solution = run(FixedTip(320.0), BaseTemperature(PLATE), h=coefficient_for(mL))
    assert solution.temperatures[0] == pytest.approx(np.interp(X, [0, LENGTH], [PLATE, 320.0]), abs=1e-9)
    conducted = K * AREA / LENGTH * (PLATE - 320.0)
    assert solution.base_heat == pytest.approx(conducted, rel=1e-10)
    assert solution.tip_heat == pytest.approx(conducted, rel=1e-10)


@every_tip
def test_a_long_fin_forgets_its_tip(tip):
    mL = 1e4
    solution = run(tip, BaseTemperature(PLATE), h=coefficient_for(mL))
    assert solution.base_heat == pytest.approx(K * AREA * mL / LENGTH * (PLATE - AIR), rel=1e-12)
    assert solution.temperatures[0, 1:-1] == pytest.approx(AIR, abs=1e-10)


def test_no_side_loss_and_no_tip_loss_is_no_heat():
    for tip in (AdiabaticTip(), ConvectiveTip()):
        solution = run(tip, Joint(PLATE, RESISTANCE), h=0.0)
        assert solution.temperatures == pytest.approx(PLATE, rel=1e-14)
        assert np.abs(solution.base_heat) < 1e-250


@pytest.mark.parametrize("resistance", [0.0, RESISTANCE, 1e6])
def test_no_side_loss_puts_joint_bar_and_tip_in_series(resistance):
    solution = run(ConvectiveTip(900.0), Joint(PLATE, resistance), h=0.0)
    heat = (PLATE - AIR) * AREA / (resistance + LENGTH / K + 1 / 900.0)
    assert solution.base_heat == pytest.approx(heat, rel=1e-13)
    assert solution.tip_heat == pytest.approx(heat, rel=1e-13)
    assert solution.base_temperature == pytest.approx(PLATE - heat * resistance / AREA, rel=1e-13)


@every_tip
def test_a_joint_without_resistance_is_none(tip):
    bare = run(tip, BaseTemperature(PLATE))
    assert_same(run(tip, Joint(PLATE, 0.0)), bare)
    assert_same(run(tip, Joint(PLATE, 1e-18)), bare)


@every_tip
def test_a_joint_of_endless_resistance_leaves_the_base_to_the_rest(tip):
    solution = run(tip, Joint(PLATE, 1e12))
    assert np.abs(solution.base_heat) < 1e-9
    if not isinstance(tip, FixedTip):
        assert solution.temperatures == pytest.approx(AIR, abs=1e-6)


@every_base
def test_tips_meet_at_their_limits(base):
    side = ConvectiveTip()
    assert_same(run(ConvectiveTip(0.0), base), run(AdiabaticTip(), base))
    assert_same(run(ConvectiveTip(H), base), run(side, base))
    assert_same(run(ConvectiveTip(1e30), base), run(FixedTip(AIR), base))
    m = np.sqrt(H * PERIMETER / (K * AREA))
    assert_same(run(ConvectiveTip(m * K), base), run(InfiniteTip(), base))


# --- what may be asked: extremes, shapes ----------------------------------------------------------


@every_tip
def test_every_value_is_finite_and_no_warning_is_given(tip):
    mL = np.array(
        [0.0, 1e-300, 1e-160, 1e-20, 1e-8, 1e-3, 0.5, 5.0, 40.0, 355.0, 709.0, 711.0, 746.0, 1e4, 1e6]
    )
    resistance = np.array([0.0, 1e-12, 1e-6, 1e-3, 1.0, 1e6])
    mL, resistance = (grid.ravel() for grid in np.meshgrid(mL, resistance))
    for base in (BaseTemperature(PLATE), Joint(PLATE, resistance)):
        with np.errstate(over="raise", invalid="raise", divide="raise"):
            solution = run(tip, base, h=coefficient_for(mL))
        for name in FIELDS:
            assert np.all(np.isfinite(getattr(solution, name))), name
        low, high = AIR - 1e-9, PLATE + 1e-9
        assert np.all((solution.temperatures > low) & (solution.temperatures < high))


def block_of(n):
    rng = np.random.default_rng(20240711)
    return {
        "k": rng.uniform(50, 400, n),
        "h": rng.uniform(5, 500, n),
        "tip": rng.uniform(300, 340, n),
        "driving": rng.uniform(350, 400, n),
        "resistance": rng.uniform(0, 1e-3, n),
        "air": rng.uniform(280, 300, n),
    }


def run_block(kind, jointed, values, x=X):
    tip = {
        "adiabatic": lambda: AdiabaticTip(),
        "side": lambda: ConvectiveTip(),
        "own": lambda: ConvectiveTip(values["tip"]),
        "fixed": lambda: FixedTip(values["tip"]),
        "infinite": lambda: InfiniteTip(),
    }[kind]()
    driving = values["driving"]
    base = Joint(driving, values["resistance"]) if jointed else BaseTemperature(driving)
    return run(tip, base, k=values["k"], h=values["h"], air=values["air"], x=x)


@pytest.mark.parametrize("jointed", [False, True], ids=["base", "joint"])
@pytest.mark.parametrize("kind", TIPS)
def test_a_block_is_its_sets_one_by_one(kind, jointed):
    n = 7
    values = block_of(n)
    block = run_block(kind, jointed, values)
    for row in range(n):
        single = run_block(kind, jointed, {name: float(array[row]) for name, array in values.items()})
        for name in FIELDS:
            assert getattr(block, name)[row] == pytest.approx(getattr(single, name)[0], rel=1e-14), name


@pytest.mark.parametrize("jointed", [False, True], ids=["base", "joint"])
@pytest.mark.parametrize("kind", TIPS)
def test_any_value_may_be_a_number_or_an_array(kind, jointed):
    n = 3
    used = {"k", "h", "driving", "air"}
    used |= {"tip"} if kind in ("own", "fixed") else set()
    used |= {"resistance"} if jointed else set()
    values = {name: np.full(n, array[0]) for name, array in block_of(n).items()}
    reference = run_block(kind, jointed, values)
    for choice in product((False, True), repeat=len(used)):
        arrays = {name for name, chosen in zip(sorted(used), choice, strict=True) if chosen}
        mixed = {name: array if name in arrays else float(array[0]) for name, array in values.items()}
        solution = run_block(kind, jointed, mixed)
        rows = n if arrays else 1
        assert solution.temperatures.shape == (rows, X.size)
        for name in FIELDS:
            assert len(getattr(solution, name)) == rows, (name, arrays)
            assert getattr(solution, name) == pytest.approx(getattr(reference, name)[:rows], rel=1e-14)


@pytest.mark.parametrize("n", [1, 3])
@pytest.mark.parametrize("n_x", [0, 1, 4])
@pytest.mark.parametrize("kind", TIPS)
def test_shapes(kind, n_x, n):
    solution = run_block(kind, True, block_of(n), x=np.linspace(0, LENGTH, n_x))
    assert solution.temperatures.shape == (n, n_x)
    assert {getattr(solution, name).shape for name in FIELDS[1:]} == {(n,)}
    assert {getattr(solution, name).dtype for name in FIELDS} == {np.dtype(np.float64)}


@every_base
@every_tip
def test_whole_numbers_are_numbers(tip, base):
    assert_same(run(tip, base, k=150, h=40, air=295), run(tip, base))


def test_solving_changes_nothing_it_was_given():
    values = block_of(4)
    before = {name: array.copy() for name, array in values.items()}
    for kind, jointed in product(TIPS, (False, True)):
        run_block(kind, jointed, values)
    assert all(np.array_equal(values[name], before[name]) for name in values)


# --- what is added later --------------------------------------------------------------------------


class Spike:
    """A pin that ends in a point: a profile of one's own."""

    length = 0.1

    def area(self, x):
        return np.pi * (0.004 * (1 - x / self.length)) ** 2

    def perimeter(self, x):
        return 2 * np.pi * 0.004 * (1 - x / self.length)

    def side_area(self):
        return np.pi * 0.004 * self.length


class FreeConvection:
    """A surface law of one's own, not proportional to the excess temperature."""

    linear = False
    uniform = True

    def flux(self, surface, air, _place=0.0, /):
        return self.response(surface, air)[0]

    def response(self, surface, air, _place=0.0, /):
        theta = surface - air
        h = 12.0 * (np.abs(theta) / 40.0) ** 0.25
        return h * theta, 1.25 * h

    def sinks(self, air, /):
        return (air,)


def test_a_new_shape_needs_no_base_class():
    assert isinstance(Spike(), Profile)
    assert isinstance(FreeConvection(), SurfaceLaw)


@every_base
@every_tip
def test_a_law_of_ones_own_is_solved_as_ours_is(tip, base):
    own, ours = (
        solve(Fin(PROFILE, K, law, tip), base, AIR, X)
        for law in (FreeConvection(), PowerCoefficient(12.0, 0.25, 40.0))
    )
    assert_same(own, ours, rel=1e-12)


@every_base
@pytest.mark.parametrize("kind", ["adiabatic", "side", "own"])
def test_a_shape_of_ones_own_is_solved_as_ours_is(kind, base):
    own, ours = (run(TIPS[kind], base, profile=shape) for shape in (Spike(), Cone(0.1, 0.008)))
    assert own.temperatures - AIR == pytest.approx(ours.temperatures - AIR, rel=1e-9)
    for name in ("base_heat", "tip_heat"):
        assert getattr(own, name) == pytest.approx(getattr(ours, name), rel=1e-9)


def test_what_is_no_profile_is_refused_by_name():
    class Sketch:
        length = 0.1

    with pytest.raises(TypeError, match=r"^Sketch is no profile: it needs length, area, perimeter, "):
        run(AdiabaticTip(), BaseTemperature(PLATE), profile=Sketch())


def test_what_is_no_law_is_refused_by_name():
    class Guess:
        linear = False

    base = BaseTemperature(PLATE)
    for profile, name in ((Spike(), "Spike"), (PROFILE, "Uniform")):
        with pytest.raises(TypeError, match=rf"^no solver for {name} with Guess$"):
            solve(Fin(profile, K, Guess(), AdiabaticTip()), base, AIR, X)
