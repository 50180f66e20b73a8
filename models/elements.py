"""Conduction and side loss of a fin of any shape, discretised once for its geometry.

The temperature is a polynomial of degree 12 on each of a few elements, continuous between them, by its values
at Legendre-Gauss-Lobatto nodes. The fin equation (A theta')' = (h/k) P theta becomes
K theta + (h/k) M theta = falls at the ends, with

    K_ij = integral A phi_i' phi_j' dx,        M_ij = integral P phi_i phi_j dx,

both symmetric and of narrow band. Elements shrink by halves towards the base, and towards a tip that is
sharp or driven, as far as the temperature is steep there; and any element is halved over which ln A or ln P
is not a polynomial to nine digits, so that a neck, a kink or a jump is found without being told of.

Source: Szabó, Babuška, Finite Element Analysis, Wiley 1991, chapters 3 and 10 (degree and graded elements).
"""

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray
from scipy.linalg.lapack import dpbsv

from finback.models.profiles import Profile

Array = NDArray[np.float64]

DEGREE = 12
ROUGHEST = 1e-9
"""Largest part of ln A or ln P [1] in its two highest polynomials before an element is halved."""
ROUNDING = 1e-15
"""Rounding of a position [1] over the length: near a sharp tip ln A is no smoother than that."""
NARROWEST = 1e-10
"""Width [1] over the length at which an element is not halved further, however rough the shape in it."""
NEGLIGIBLE = 1e-13
"""Share of a fin's heat [1] below which no element is needed."""
TINY = float(np.finfo(np.float64).tiny)


@dataclass(frozen=True, slots=True)
class Basis:
    """Polynomials on [-1, 1] by their values at nodes; all numbers without dimension [1].

    points and weights of quadrature, shape (q,); values and slopes of the polynomials there, (q, degree + 1);
    coefficients, of Legendre's polynomials, (degree + 1, degree + 1); highest, what gives the two highest
    coefficients of a function from its values at the points, (2, q).
    """

    points: Array
    weights: Array
    values: Array
    slopes: Array
    coefficients: Array
    highest: Array

    def at(self, xi: Array) -> Array:
        """Values [1] of the polynomials at xi in [-1, 1], shape (n,) -> (n, degree + 1)."""
        found: Array = legendre.legvander(xi, self.coefficients.shape[1] - 1) @ self.coefficients
        return found


@lru_cache(maxsize=4)
def basis(degree: int) -> Basis:
    """Return the polynomials of a degree by their values at the Legendre-Gauss-Lobatto nodes."""
    last = np.zeros(degree + 1)
    last[-1] = 1
    inner = np.sort(np.real(legendre.legroots(legendre.legder(last))))  # complex in newer numpy, all real
    nodes = np.concatenate([[-1.0], inner, [1.0]])
    points, weights = legendre.leggauss(degree + 3)
    coefficients = np.linalg.inv(legendre.legvander(nodes, degree))
    return Basis(
        points,
        weights,
        values=legendre.legvander(points, degree) @ coefficients,
        slopes=legendre.legvander(points, degree - 1) @ legendre.legder(coefficients),
        coefficients=coefficients,
        highest=np.asarray(np.linalg.inv(legendre.legvander(points, degree + 2))[-2:], dtype=np.float64),
    )


@dataclass(frozen=True)
class Elements:
    """A fin divided into elements, its base at unknown 0 and its tip at the last of n.

    edges [m] (n_elements + 1,); conduction and loss, quadrature weights times A/(dx/dxi) [m] and P dx/dxi
    [m²], each (n_elements, q); tip_loss [m²], the area at the tip's end that loses heat as the side does;
    cold, whether the tip has the air's temperature because it is too sharp to be reached by heat.
    """

    edges: Array
    conduction: Array
    loss: Array
    tip_loss: float
    cold: bool
    degree: int

    @property
    def n(self) -> int:
        """Number of unknowns."""
        return len(self.conduction) * self.degree + 1

    @cached_property
    def unknowns(self) -> NDArray[np.intp]:
        """Unknowns of each element, shape (n_elements, degree + 1)."""
        return np.arange(len(self.conduction))[:, None] * self.degree + np.arange(self.degree + 1)

    @cached_property
    def load(self) -> Array:
        """M times a constant of one, shape (n,) [m²]."""
        shares = (self.loss @ basis(self.degree).values).ravel()
        found: Array = np.bincount(self.unknowns.ravel(), shares).astype(np.float64)
        found[-1] += self.tip_loss
        return found

    @cached_property
    def surface(self) -> float:
        """Surface that loses heat [m²]."""
        return float(self.loss.sum()) + self.tip_loss

    @cached_property
    def bands(self) -> tuple[Array, Array]:
        """K [m] and M [m²] by their lower bands, each (degree + 1, n)."""
        polynomials = basis(self.degree)
        stiffness = self._band(self.conduction, polynomials.slopes)
        mass = self._band(self.loss, polynomials.values)
        mass[0, -1] += self.tip_loss
        return stiffness, mass

    def _band(self, weights: Array, values: Array) -> Array:
        n_elements, size = len(weights), self.degree + 1
        products = (values[:, :, None] * values[:, None, :]).reshape(len(values), -1)
        blocks = (weights @ products).reshape(n_elements, size, size)
        band = np.zeros((size, self.n))
        for column in range(size):
            start = band[:, column : column + (n_elements - 1) * self.degree + 1 : self.degree]
            start[: size - column] += blocks[:, column:, column].T
        return band

    def solve(self, ratio: float, loads: Array) -> Array:
        """Solve (K + ratio M) w = loads with the base held at zero; ratio h/k [1/m], loads (n, n_loads)."""
        stiffness, mass = self.bands
        found = np.zeros_like(loads)
        _, found[1:], failed = dpbsv((stiffness + ratio * mass)[:, 1:], loads[1:], lower=1, overwrite_ab=1)
        if failed:
            raise ArithmeticError(f"the equations of a fin could not be solved at h/k = {ratio} 1/m")
        return found

    def slopes(self, vectors: Array) -> Array:
        """Return rows whose products are those of K: (n, n_vectors) -> (n_rows, n_vectors)."""
        return self._rows(np.sqrt(self.conduction), basis(self.degree).slopes, vectors)

    def values(self, vectors: Array) -> Array:
        """Return rows whose products are those of M: (n, n_vectors) -> (n_rows, n_vectors)."""
        rows = self._rows(np.sqrt(self.loss), basis(self.degree).values, vectors)
        return np.concatenate([rows, np.sqrt(self.tip_loss) * vectors[-1:]])

    def _rows(self, weights: Array, values: Array, vectors: Array) -> Array:
        found: Array = weights[:, :, None] * (values @ vectors[self.unknowns])
        return found.reshape(-1, vectors.shape[1])

    def at(self, x: Array, vectors: Array) -> Array:
        """Return vectors of values (n, n_vectors) at positions x [m] of shape (n_x,) -> (n_x, n_vectors)."""
        element = np.clip(np.searchsorted(self.edges, x, side="right") - 1, 0, len(self.edges) - 2)
        start, end = self.edges[element], self.edges[element + 1]
        shares = basis(self.degree).at(2 * (x - start) / (end - start) - 1)
        found: Array = (shares[:, None, :] @ vectors[self.unknowns[element]])[:, 0]
        return found


def discretise(
    profile: Profile, base_layer: float, tip_layer: float | None, tip_loss: float, degree: int = DEGREE
) -> Elements:
    """Divide a fin into elements.

    Arguments: profile; base_layer and tip_layer [m], how short elements must be at base and tip (None:
    nothing drives the tip); tip_loss [m²], the area of the tip face if it loses heat as the side does; degree
    of the polynomials. Raises ValueError for a profile whose area is not positive, or whose perimeter is
    negative, or that is not finite.
    """
    polynomials = basis(degree)
    length, side = profile.length, profile.side_area()
    sharp = float(profile.area(np.array([length]))[0]) <= 0
    near_tip = np.empty(0) if tip_layer is None else _halves(length, tip_layer)
    edges = _first_edges(profile, _halves(length, base_layer), _to_sharp_tip(profile) if sharp else near_tip)
    while True:
        half = np.diff(edges) / 2
        x = edges[:-1, None] + half[:, None] * (1 + polynomials.points)
        area, perimeter = (_checked(profile, name, x) for name in ("area", "perimeter"))
        rough = np.abs(np.log(np.stack([area, perimeter]) + TINY) @ polynomials.highest.T).max(axis=(0, 2))
        large = (half > NARROWEST * length / 2) & (half * perimeter.max(axis=1) > NEGLIGIBLE * side)
        large[-1] &= not sharp  # divided finely enough from the start
        halved = (rough > ROUGHEST + ROUNDING * length / half) & large
        if not halved.any():
            break
        edges = np.sort(np.concatenate([edges, (edges[:-1] + half)[halved]]))
    loss = perimeter * polynomials.weights * half[:, None]
    return Elements(
        edges,
        conduction=area * polynomials.weights / half[:, None],
        loss=loss,
        tip_loss=_missed(profile, edges[-2], float(loss[-1].sum())) if sharp else tip_loss,
        cold=sharp and _is_cold(profile),
        degree=degree,
    )


def _first_edges(profile: Profile, from_base: Array, from_tip: Array) -> Array:
    length = profile.length
    breaks = np.asarray(getattr(profile, "breaks", ()), dtype=np.float64).ravel()
    breaks = breaks[(breaks > 0) & (breaks < length)]
    from_base = from_base[_apart(from_base, breaks)]
    from_tip = from_tip[_apart(from_tip, length - breaks)]
    return np.unique(np.concatenate([[0.0, length], breaks, from_base, length - from_tip]))


def _to_sharp_tip(profile: Profile) -> Array:
    """Return distances from a sharp tip [m] at which elements end.

    What lies beyond s loses a share P s of the side's heat, and is colder by about m² s² than at s: the
    product is what a polynomial there could get wrong. At a cold tip it gets all wrong, however small s is.
    """
    length = profile.length
    (base_area,), (base_perimeter,) = profile.area(np.zeros(1)), profile.perimeter(np.zeros(1))
    s = _halves(length, NARROWEST * length)
    if _is_cold(profile):
        return s
    perimeter = profile.perimeter(length - s)
    lost = perimeter * s / profile.side_area()
    colder = (
        perimeter * s**2 / _checked(profile, "area", length - s) / (base_perimeter * length**2 / base_area)
    )
    last = np.flatnonzero(lost * colder < NEGLIGIBLE)
    return s[: last[0] + 1] if last.size else s


def _is_cold(profile: Profile) -> bool:
    """Tell whether a sharp tip has the air's temperature: m² s² does not vanish with s = L - x."""
    s = profile.length * np.array([1e-4, 1e-6])
    x = profile.length - s
    far, near = s**2 * profile.perimeter(x) / _checked(profile, "area", x)
    return bool(near > 0.9 * far)


def _missed(profile: Profile, edge: float, counted: float) -> float:
    """Return the side [m²] beyond the last edge [m] of a sharp tip that quadrature missed, P without bound.

    Here it is in the root of the distance from the tip, in which such a perimeter is smooth.
    """
    polynomials = basis(DEGREE)
    width = profile.length - edge
    root = (1 + polynomials.points) / 2
    perimeter = profile.perimeter(profile.length - width * root**2)
    return max(0.0, float(np.sum(polynomials.weights * root * perimeter)) * width - counted)


def _apart(distances: Array, breaks: Array) -> NDArray[np.bool_]:
    """Tell which distances from an end [m] lie apart from every break, by a tenth of themselves or more."""
    if not breaks.size:
        return np.ones(len(distances), dtype=np.bool_)
    return np.asarray(np.abs(distances[:, None] - breaks).min(axis=1) > 0.1 * distances)


def _halves(length: float, shortest: float) -> Array:
    """Return half the length, a quarter, an eighth and so on, to the first one below the shortest [m]."""
    n = max(1, int(np.ceil(np.log2(length / shortest))))
    found: Array = length * np.exp2(-np.arange(1.0, n + 1))
    return found


def _checked(profile: Profile, name: str, x: Array) -> Array:
    values = np.asarray(getattr(profile, name)(x.ravel()), dtype=np.float64).reshape(x.shape)
    smallest = (
        0.0 if name == "perimeter" else TINY
    )  # a part of the side may be insulated, no part of the fin cut
    wrong = ~(np.isfinite(values) & (values >= smallest))
    if wrong.any():
        place, value = float(x[wrong][0]), float(values[wrong][0])
        what = "finite and not negative" if name == "perimeter" else "finite and positive"
        raise ValueError(f"{name} of {type(profile).__name__} must be {what}, got {value!r} at {place!r} m")
    return values
