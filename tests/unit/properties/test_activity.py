"""What any activity model must obey, whatever its parameters."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.properties.activity import Nrtl, Wilson, nrtl_ln_gamma, wilson_lambdas, wilson_ln_gamma

energies = st.floats(-3000.0, 4000.0)
temperatures = st.floats(300.0, 400.0)
fractions = st.floats(0.02, 0.98)


def nrtl(b12: float, b21: float) -> Nrtl:
    return Nrtl(((0.0, b12), (b21, 0.0)), ((0.0, 0.3), (0.3, 0.0)))


def wilson(a12: float, a21: float) -> Wilson:
    return Wilson((40.73, 18.07), ((0.0, a12), (a21, 0.0)))


@given(energies, energies, temperatures, fractions)
def test_gibbs_duhem_nrtl(b12: float, b21: float, t: float, x: float) -> None:
    def ln_gamma(z: float) -> tuple[float, ...]:
        return nrtl_ln_gamma(math, nrtl(b12, b21), t, (z, 1.0 - z))

    assert duhem_sum(ln_gamma(x + 1e-5), ln_gamma(x - 1e-5), x) == pytest.approx(0.0, abs=1e-4)


@given(energies, energies, temperatures, fractions)
def test_gibbs_duhem_wilson(a12: float, a21: float, t: float, x: float) -> None:
    lambdas = wilson_lambdas(math, wilson(a12, a21), t)

    def ln_gamma(z: float) -> tuple[float, ...]:
        return wilson_ln_gamma(math, lambdas, (z, 1.0 - z))

    assert duhem_sum(ln_gamma(x + 1e-5), ln_gamma(x - 1e-5), x) == pytest.approx(0.0, abs=1e-4)


def duhem_sum(above: tuple[float, ...], below: tuple[float, ...], x: float) -> float:
    """x1 dln(gamma1)/dx1 + x2 dln(gamma2)/dx1, zero at constant T and p."""
    slopes = [(a - b) / 2e-5 for a, b in zip(above, below, strict=True)]
    return x * slopes[0] + (1.0 - x) * slopes[1]


@given(energies, energies, temperatures, fractions)
def test_the_short_form_for_two_is_the_long_form(
    b12: float, b21: float, t: float, x: float
) -> None:
    # A third component in no amount sends the same mixture through the general sums.
    three = Nrtl(
        ((0.0, b12, 100.0), (b21, 0.0, 50.0), (70.0, 30.0, 0.0)),
        ((0.0, 0.3, 0.2), (0.3, 0.0, 0.2), (0.2, 0.2, 0.0)),
    )
    short = nrtl_ln_gamma(math, nrtl(b12, b21), t, (x, 1.0 - x))
    assert nrtl_ln_gamma(math, three, t, (x, 1.0 - x, 0.0))[:2] == pytest.approx(short, abs=1e-10)

    volumes = Wilson((40.73, 18.07, 30.0), three.energies_j_mol)
    short = wilson_ln_gamma(math, wilson_lambdas(math, wilson(b12, b21), t), (x, 1.0 - x))
    long = wilson_ln_gamma(math, wilson_lambdas(math, volumes, t), (x, 1.0 - x, 0.0))
    assert long[:2] == pytest.approx(short, abs=1e-10)


def test_pure_components_have_no_excess() -> None:
    assert nrtl_ln_gamma(math, nrtl(-1062.0, 3536.0), 350.0, (1.0, 0.0))[0] == 0.0
    lambdas = wilson_lambdas(math, wilson(509.4, 2015.12), 350.0)
    assert wilson_ln_gamma(math, lambdas, (0.0, 1.0))[1] == 0.0
