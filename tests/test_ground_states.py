"""Ground states, from a plan in lab units to the figures of the summary, against tables and independent calculations.

Each row is one plan at accuracy "fine"; energies come back in units of the trap's h nu, lengths in a_ho. Energies that
are small beside the chemical potential are compared on its scale.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from math import pi, sqrt

import pytest
from scipy.constants import h, hbar

import trapsim
from reference import anisotropic, tables, units

Solve = Callable[[trapsim.Plan], trapsim.Run]

#: the scale of all plans but the worked one: Rb-87 in a trap of 100 Hz, 1000 atoms
HZ, NUMBER = 100.0, 1000.0
MASS = units.MASSES["Rb-87"]
A_HO = sqrt(hbar / (MASS * 2 * pi * HZ))
#: length of a direction that nothing traps, m
LENGTH = 10e-6
CLOSE = 1e-5


def plan(
    frequencies: tuple[float, float, float],
    na: float,
    *,
    axes: str = "auto",
    accuracy: str = "fine",
    ground: str = "conjugate gradient",
) -> trapsim.Plan:
    """A trap with frequencies in units of 100 Hz and N a in m; a direction with none is uniform and 10 um long."""
    hz = ", ".join(f'"{float(HZ * f)!r} Hz"' for f in frequencies)
    extent = ", ".join('"auto"' if f else f'"{LENGTH * 1e6:g} um"' for f in frequencies)
    return trapsim.plan_from_text(
        f"""
        [atoms]
        mass = "86.90918053 u"
        number = {NUMBER}
        scattering_length = "{float(na / NUMBER)!r} m"
        [trap.dipole]
        kind = "harmonic"
        frequency = [{hz}]
        [numerics]
        accuracy = "{accuracy}"
        ground = "{ground}"
        axes = "{axes}"
        extent = [{extent}]
        threads = 1
        """,
        "ground",
    )


def figures(run: trapsim.Run, *, area: float = 1.0) -> dict[str, float]:
    """The ground state in oscillator units; `area` (m^k) is what the uniform directions cover."""
    g = run.summary.ground
    trapped = sum(w is not None for w in g.width_um)
    return {
        "mu": g.chemical_potential_hz / HZ,
        "energy": g.energy_hz / HZ,
        "kinetic": g.kinetic_hz / HZ,
        "potential": g.trap_hz / HZ,
        "interaction": g.interaction_hz / HZ,
        "peak_density": g.peak_density_per_um3 * 1e18 / NUMBER * A_HO**trapped * area,
        **{f"{a}_width": w * 1e-6 / A_HO for a, w in zip("xyz", g.width_um, strict=True) if w is not None},
    }


def agree(found: Mapping[str, float], row: Mapping[str, float], mu: float) -> None:
    """All figures of a row to 1e-5, energies that are small beside mu to 1e-6 of it; and the figures' own law."""
    for name, value in row.items():
        small = 1e-6 * abs(mu) if name in ("energy", "kinetic", "potential", "interaction") else 0.0
        assert found[name] == pytest.approx(value, rel=CLOSE, abs=small), name
    assert found["mu"] == pytest.approx(found["energy"] + found["interaction"], rel=1e-12)


def in_balance(run: trapsim.Run) -> None:
    """The virial theorem holds along each direction: 2 K_j - 2 P_j + E_int = 0, exact in a harmonic trap."""
    assert run.summary.ground.virial < 1e-5
    assert run.summary.ground.residual < 1.01e-9


every_axes = pytest.mark.parametrize("axes", ["auto", "full"])
#: near collapse a full grid is large
both_axes_slowly = pytest.mark.parametrize("axes", ["auto", pytest.param("full", marks=pytest.mark.slow)])


@pytest.mark.slow
@every_axes
@pytest.mark.parametrize("row", tables.ISOTROPIC, ids=lambda r: f"{r.beta:g}")
def test_isotropic_repulsive(solved: Solve, row: tables.Isotropic, axes: str) -> None:
    # Independent calculation: Chebyshev collocation and Newton's method (the quantity: Bao & Tang, J. Comput. Phys.
    # 187, 230 (2003)).
    run = solved(plan((1, 1, 1), row.beta / (4 * pi) * A_HO, axes=axes))
    expected = row._asdict()
    width, _ = expected.pop("width"), [expected.pop(name) for name in ("beta", "source")]
    agree(figures(run), expected | {f"{a}_width": width for a in "xyz"}, row.mu)
    in_balance(run)
    assert run.summary.numerics.axes == (("wave",) * 3 if axes == "full" else ("mirror", "radial", "radial"))


@pytest.mark.parametrize("row", tables.ISOTROPIC_PUBLISHED, ids=lambda r: f"{r.beta:g}")
def test_isotropic_published(solved: Solve, row: tables.Published) -> None:
    # Bao & Tang, J. Comput. Phys. 187, 230 (2003), value from memory; printed digits, the last cut or rounded.
    run = solved(plan((1, 1, 1), row.beta / (4 * pi) * A_HO))
    assert figures(run)["mu"] == pytest.approx(row.mu, abs=1.01 * 10.0**-row.digits)


@both_axes_slowly
@pytest.mark.parametrize("row", tables.ATTRACTIVE, ids=lambda r: f"{r.na:g}")
def test_isotropic_attractive(solved: Solve, row: tables.Attractive, axes: str) -> None:
    # Independent calculation: Chebyshev collocation and Newton's method.
    run = solved(plan((1, 1, 1), -row.na * A_HO, axes=axes))
    expected = row._asdict()
    width, _ = expected.pop("width"), [expected.pop(name) for name in ("na", "source")]
    agree(figures(run), expected | {f"{a}_width": width for a in "xyz"}, row.mu)
    in_balance(run)


@pytest.mark.slow
@every_axes
@pytest.mark.parametrize("accuracy", ["draft", "normal"])
def test_just_below_the_collapse_there_is_a_cloud_and_just_above_there_is_none(
    solved: Solve, axes: str, accuracy: str
) -> None:
    # Gammal et al., Phys. Rev. A 64, 055602 (2001): 0.57497 at mu = 0.364 (value from memory, confirmed by an
    # independent calculation). The Gaussian ansatz would say 0.6705.
    held = solved(plan((1, 1, 1), -0.574 * A_HO, axes=axes, accuracy=accuracy))
    assert 0.364 < figures(held)["mu"] < 0.505
    with pytest.raises(trapsim.PhysicsRefused, match="the cloud collapses"):
        solved(plan((1, 1, 1), -0.576 * A_HO, axes=axes, accuracy=accuracy))


def test_the_collapse_in_the_trap_of_an_experiment(solved: Solve) -> None:
    # Gammal et al., Phys. Rev. A 64, 055602 (2001), abstract: 0.55 with a_ho of the mean frequency, for the trap of
    # Roberts et al., 6.80 Hz by 17.35 Hz (trap from memory). a_ho of the tight direction would give 0.643.
    lam = 6.80 / 17.35
    a_mean = A_HO / sqrt(lam ** (1 / 3))
    solved(plan((1, 1, lam), -0.545 * a_mean))
    with pytest.raises(trapsim.PhysicsRefused, match="collapses"):
        solved(plan((1, 1, lam), -0.555 * a_mean))


@pytest.mark.slow
def test_imaginary_time_refuses_where_the_conjugate_gradient_does(solved: Solve) -> None:
    # As above; at 0.55 the cloud holds, with the tabulated mu (independent calculation).
    row = next(r for r in tables.ATTRACTIVE if r.na == 0.55)
    run = solved(plan((1, 1, 1), -0.55 * A_HO, accuracy="normal", ground="imaginary time"))
    assert figures(run)["mu"] == pytest.approx(row.mu, rel=1e-5)
    with pytest.raises(trapsim.PhysicsRefused, match="collapses"):
        solved(plan((1, 1, 1), -0.576 * A_HO, accuracy="normal", ground="imaginary time"))


@every_axes
@pytest.mark.parametrize("row", tables.ROUND, ids=lambda r: f"{r.number}")
def test_round_trap_of_dalfovo_and_stringari(solved: Solve, row: tables.Round, axes: str) -> None:
    # Independent calculation: oscillator functions and Newton's method, good to 2e-6 (the quantity: Dalfovo &
    # Stringari, Phys. Rev. A 53, 2477 (1996), Table I).
    run = solved(plan((1, 1, tables.ROUND_LAM), row.number * tables.ROUND_A * A_HO, axes=axes))
    expected = row._asdict()
    for name in ("number", "source"):
        expected.pop(name)
    agree(figures(run), expected | {"y_width": row.x_width}, row.mu)
    in_balance(run)
    assert run.summary.numerics.axes == (("wave",) * 3 if axes == "full" else ("radial", "radial", "mirror"))


@pytest.mark.parametrize("row", tables.ROUND_PUBLISHED, ids=lambda r: f"{r.number}")
def test_round_trap_published(solved: Solve, row: tables.RoundPublished) -> None:
    # Dalfovo & Stringari, Phys. Rev. A 53, 2477 (1996), Table I, value from memory, printed digits.
    found = figures(solved(plan((1, 1, tables.ROUND_LAM), row.number * tables.ROUND_A * A_HO)))
    assert found["mu"] == pytest.approx(row.mu, abs=0.5001 * 10.0**-row.digits)
    assert found["energy"] == pytest.approx(row.energy, abs=0.5001e-2)


@pytest.mark.parametrize("stiff", [0, 1, 2])
def test_the_stiff_direction_may_be_any_one(solved: Solve, stiff: int) -> None:
    # Independent calculation, as above; swapping axes or using the radial axis for the wrong pair would show.
    row = next(r for r in tables.ROUND if r.number == 1000)
    trap = tuple(tables.ROUND_LAM if j == stiff else 1.0 for j in range(3))
    run = solved(plan(trap, row.number * tables.ROUND_A * A_HO))
    widths = {f"{a}_width": row.z_width if j == stiff else row.x_width for j, a in enumerate("xyz")}
    agree(figures(run), {"mu": row.mu, "energy": row.energy} | widths, row.mu)
    assert run.summary.numerics.axes[stiff] == "mirror"
    assert run.summary.numerics.axes.count("radial") == 2


def test_three_different_frequencies(solved: Solve) -> None:
    # Independent calculation: products of oscillator functions and Newton's method; its figures are integrals, the
    # density at one point converges slowly there.
    omegas = (1.0, 1.3, 1.7)
    ref = anisotropic.ground((1, 1, 1), omegas, 5.0, counts=(8, 8, 8))
    run = solved(plan(omegas, 5.0 / (4 * pi) * A_HO))
    expected = {
        "mu": ref.mu, "kinetic": sum(ref.kinetic), "potential": sum(ref.potential), "interaction": ref.interaction,
        **{f"{a}_width": w for a, w in zip("xyz", ref.widths, strict=True)},
    }  # fmt: skip
    agree(figures(run), expected, ref.mu)
    in_balance(run)
    assert run.summary.numerics.axes == ("mirror", "mirror", "mirror")


@pytest.mark.parametrize("row", tables.LINE, ids=lambda r: f"{r.beta:g}")
def test_on_a_line(solved: Solve, row: tables.LowDimension) -> None:
    # Independent calculation: Chebyshev collocation and Newton's method. y and z are uniform: beta = 4 pi N a a_ho/L^2.
    run = solved(plan((1, 0, 0), row.beta * LENGTH**2 / (4 * pi * A_HO)))
    low_dimension(run, row, LENGTH**2)
    assert run.summary.ground.width_um[1:] == (None, None)
    assert run.summary.numerics.axes == ("mirror", "uniform", "uniform")


@every_axes
@pytest.mark.parametrize("row", tables.PLANE, ids=lambda r: f"{r.beta:g}")
def test_in_a_plane(solved: Solve, row: tables.LowDimension, axes: str) -> None:
    # Independent calculation: Laguerre functions and Newton's method. z is uniform: beta = 4 pi N a/L_z.
    run = solved(plan((1, 1, 0), row.beta * LENGTH / (4 * pi), axes=axes))
    low_dimension(run, row, LENGTH)
    assert run.summary.numerics.axes == (("wave", "wave") if axes == "full" else ("radial", "radial")) + ("uniform",)


def low_dimension(run: trapsim.Run, row: tables.LowDimension, area: float) -> None:
    """Compare a ground state with uniform directions."""
    expected = row._asdict()
    width, _ = expected.pop("width"), [expected.pop(name) for name in ("beta", "source")]
    found = figures(run, area=area)
    widths = {name: width for name in found if name.endswith("width")}
    agree(found, expected | widths | {"potential": row.energy - row.kinetic - row.interaction}, row.mu)
    in_balance(run)


@pytest.mark.parametrize("row", tables.LINE_PUBLISHED, ids=lambda r: f"{r.beta:g}")
def test_on_a_line_published(solved: Solve, row: tables.Published) -> None:
    # Bao & Tang, J. Comput. Phys. 187, 230 (2003), value from memory; printed digits, the last cut or rounded.
    run = solved(plan((1, 0, 0), row.beta * LENGTH**2 / (4 * pi * A_HO)))
    assert figures(run)["mu"] == pytest.approx(row.mu, abs=1.01 * 10.0**-row.digits)


# lab units


@every_axes
def test_the_worked_cloud_of_100000_rubidium_atoms(solved: Solve, axes: str) -> None:
    # Independent calculation: Rb-87, a = 100.4 a0, N = 1e5, 100 Hz: mu/h = 1773.02 Hz, n0 = 2.27795e14 cm^-3,
    # x_rms = 2.42996 um. Baym & Pethick, Phys. Rev. Lett. 76, 6 (1996): R = 6.40498 um.
    run = solved(
        trapsim.plan_from_text(
            f"""
            [atoms]
            species = "Rb-87"
            number = 1e5
            scattering_length = "100.4 a0"
            [trap.dipole]
            kind = "harmonic"
            frequency = ["100 Hz", "100 Hz", "100 Hz"]
            [numerics]
            accuracy = "fine"
            axes = "{axes}"
            threads = 1
            """,
            "worked",
        )
    )
    g = run.summary.ground
    assert g.chemical_potential_hz == pytest.approx(1773.02, abs=0.006)
    assert g.peak_density_per_um3 * 1e12 == pytest.approx(2.27795e14, abs=0.6e9)
    assert g.width_um == pytest.approx((2.42996,) * 3, abs=0.6e-5)
    assert g.thomas_fermi_radius_um == pytest.approx((6.40498,) * 3, abs=1e-4)
    # n a^3 and 1/sqrt(8 pi n a) at this peak density
    assert g.gas_parameter == pytest.approx(2.27795e20 * (100.4 * units.A0) ** 3, rel=1e-5)
    assert g.healing_length_um == pytest.approx(1e6 / sqrt(8 * pi * 2.27795e20 * 100.4 * units.A0), rel=1e-5)
    # Thomas-Fermi, to a few per cent: release energy 2 mu/7, mu = 1763.70 Hz
    tf = units.thomas_fermi(MASS, (2 * pi * 100.0,) * 3, 1e5, 100.4 * units.A0)
    assert tf.mu / h == pytest.approx(1763.70, abs=0.006)
    assert g.kinetic_hz + g.interaction_hz == pytest.approx(tf.release_energy / h, rel=0.03)
    assert g.chemical_potential_hz > tf.mu / h


@pytest.mark.parametrize("beta", [10.0, 1000.0])
def test_both_ways_of_relaxing_agree_from_the_plan_on(solved: Solve, beta: float) -> None:
    # Two methods, one equation: mu to 1e-6.
    direct, slow = (
        solved(plan((1, 1, 1), beta / (4 * pi) * A_HO, accuracy="normal", ground=g))
        for g in ("conjugate gradient", "imaginary time")
    )
    assert figures(slow)["mu"] == pytest.approx(figures(direct)["mu"], rel=1e-6)
    assert slow.summary.numerics.ground.pairs > 10 * direct.summary.numerics.ground.pairs


@pytest.mark.parametrize(("accuracy", "close"), [("draft", 2e-3), ("normal", 1e-4)])
@every_axes
def test_the_coarser_accuracies_are_worth_what_they_promise(
    solved: Solve, accuracy: str, close: float, axes: str
) -> None:
    # Independent calculation, as above; promised for widths: about 1e-3 (draft), 1e-4 (normal).
    for row in tables.ISOTROPIC:
        if row.beta in (0, 10, 100, 10000):
            found = figures(solved(plan((1, 1, 1), row.beta / (4 * pi) * A_HO, accuracy=accuracy, axes=axes)))
            for a in "xyz":
                assert found[f"{a}_width"] == pytest.approx(row.width, rel=close)
            assert found["mu"] == pytest.approx(row.mu, rel=close)
