"""The five combined blocking laws (Bolton, LaCasse & Kuriyel, J. Membr. Sci. 277 (2006) 75–84; model.md,
section 2).

In four of them one law, the outer, acts on what another, the inner, leaves open: with G(l) = ∫₀ˡ R/R0 of
the inner law, R/R0 = outer(G)·G′ and S/R0 is the outer law's integral at G. Complete blocking has G = −ln(1
− k·l)/k, intermediate G = (e^(k·l) − 1)/k. Cake and standard together add their resistances. Loadings in
L/m², k's in m²/L, in the order of the law's parameters; see `blocking.py` for what each function returns.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trainopt.curves import blocking
from trainopt.curves.blocking import Floats


@dataclass(frozen=True)
class Inner:
    """The law that closes the medium first: `name` "complete" or "intermediate"."""

    name: str

    def open(self, l: Floats, k: float) -> Floats:
        """G(l) in L/m²."""
        area = blocking.complete_area if self.name == "complete" else blocking.intermediate_area
        return area(l, k)

    def slope(self, l: Floats, k: float) -> Floats:
        """G′(l), the inner law's own R/R0."""
        shape = blocking.complete if self.name == "complete" else blocking.intermediate
        return shape(l, k)

    def slopes(self, l: Floats, k: float) -> tuple[Floats, ...]:
        """d ln G′ by k and by l."""
        slopes = blocking.complete_slopes if self.name == "complete" else blocking.intermediate_slopes
        return slopes(l, k)

    def open_by_k(self, l: Floats, k: float) -> Floats:
        """dG/dk."""
        by_k = blocking.complete_area_slopes if self.name == "complete" else blocking.intermediate_area_slopes
        return by_k(l, k)[0]

    def loading_at(self, opened: float, k: float) -> float:
        """The loading where G reaches `opened`; infinite where it never does."""
        if k <= 0.0:
            return opened
        if self.name == "complete":
            return float(-np.expm1(-k * opened) / k)
        return float(np.log1p(k * opened) / k)


@dataclass(frozen=True)
class CakeOver:
    """Cake with k_c over an inner law with k: R/R0 = (1 + k_c·G)·G′, S/R0 = G + k_c·G²/2."""

    inner: Inner

    def shape(self, l: Floats, kc: float, k: float) -> Floats:
        """R/R0."""
        return (1.0 + kc * self.inner.open(l, k)) * self.inner.slope(l, k)

    def area(self, l: Floats, kc: float, k: float) -> Floats:
        """S/R0."""
        return blocking.cake_area(self.inner.open(l, k), kc)

    def slopes(self, l: Floats, kc: float, k: float) -> tuple[Floats, ...]:
        """d ln R by k_c, k and l."""
        opened, (by_k, by_l) = self.inner.open(l, k), self.inner.slopes(l, k)
        outer = 1.0 + kc * opened
        inner_k = by_k + kc / outer * self.inner.open_by_k(l, k)
        return opened / outer, inner_k, by_l + kc / outer * self.inner.slope(l, k)

    def area_slopes(self, l: Floats, kc: float, k: float) -> tuple[Floats, ...]:
        """d(S/R0) by k_c and k."""
        opened = self.inner.open(l, k)
        return 0.5 * opened**2, (1.0 + kc * opened) * self.inner.open_by_k(l, k)

    def pole(self, _: float, k: float) -> float:
        """That of the inner law; cake has none."""
        return blocking.complete_pole(k) if self.inner.name == "complete" else float("inf")


@dataclass(frozen=True)
class StandardUnder:
    """An inner law with k, and standard with k_s: R/R0 = G′/(1 − k_s·G/2)², S/R0 = G/(1 − k_s·G/2)."""

    inner: Inner

    def shape(self, l: Floats, k: float, ks: float) -> Floats:
        """R/R0."""
        return self.inner.slope(l, k) * blocking.standard(self.inner.open(l, k), ks)

    def area(self, l: Floats, k: float, ks: float) -> Floats:
        """S/R0."""
        return blocking.standard_area(self.inner.open(l, k), ks)

    def slopes(self, l: Floats, k: float, ks: float) -> tuple[Floats, ...]:
        """d ln R by k, k_s and l."""
        opened, (by_k, by_l) = self.inner.open(l, k), self.inner.slopes(l, k)
        by_ks, by_opened = blocking.standard_slopes(opened, ks)
        inner_k = by_k + by_opened * self.inner.open_by_k(l, k)
        return inner_k, by_ks, by_l + by_opened * self.inner.slope(l, k)

    def area_slopes(self, l: Floats, k: float, ks: float) -> tuple[Floats, ...]:
        """d(S/R0) by k and k_s."""
        opened = self.inner.open(l, k)
        by_k = blocking.standard(opened, ks) * self.inner.open_by_k(l, k)
        return by_k, blocking.standard_area_slopes(opened, ks)[0]

    def pole(self, k: float, ks: float) -> float:
        """Where standard blocking has closed all that the inner law leaves, or the inner law's own pole."""
        own = blocking.complete_pole(k) if self.inner.name == "complete" else float("inf")
        return min(own, self.inner.loading_at(2.0 / ks, k)) if ks > 0.0 else own


@dataclass(frozen=True)
class CakeBeside:
    """Cake with k_c beside standard blocking with k_s: R/R0 = (1 − k_s·l/2)⁻² + k_c·l."""

    def shape(self, l: Floats, kc: float, ks: float) -> Floats:
        """R/R0."""
        return blocking.standard(l, ks) + kc * l

    def area(self, l: Floats, kc: float, ks: float) -> Floats:
        """S/R0."""
        return blocking.standard_area(l, ks) + 0.5 * kc * l * l

    def slopes(self, l: Floats, kc: float, ks: float) -> tuple[Floats, ...]:
        """d ln R by k_c, k_s and l."""
        a = 1.0 - 0.5 * ks * l
        r = a**-2 + kc * l
        return l / r, l * a**-3 / r, (ks * a**-3 + kc) / r

    def area_slopes(self, l: Floats, _: float, ks: float) -> tuple[Floats, ...]:
        """d(S/R0) by k_c and k_s."""
        return 0.5 * l * l, blocking.standard_area_slopes(l, ks)[0]

    def pole(self, _: float, ks: float) -> float:
        """That of standard blocking."""
        return blocking.standard_pole(ks)


Combined = CakeOver | StandardUnder | CakeBeside
