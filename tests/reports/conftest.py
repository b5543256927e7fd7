"""Reports to render: a sampled oscillator with every state a number can have, and its levels."""

import math

import numpy as np
import pytest

from quarterturn.reports.report import Curve, Report, Row


def oscillator_correlator(points: int) -> Curve:
    """exp(-t)/2 of the harmonic oscillator with w = 1, with errors that grow relative to it."""
    t = np.linspace(0, 4, points)
    exact = 0.5 * np.exp(-t)
    error = 0.001 + 0.01 * exact
    noise = np.random.default_rng(20).normal(size=points)
    return Curve(
        "<q(t) q(0)>",
        r"\langle q(t)\,q(0)\rangle",
        "t",
        tuple(t.tolist()),
        tuple((exact + error * noise).tolist()),
        tuple(error.tolist()),
        tuple(exact.tolist()),
    )


def effective_gap(points: int) -> Curve:
    t = np.linspace(0, 3, points)
    error = 0.004 * np.exp(t)
    y = 1 + error * np.random.default_rng(21).normal(size=points)
    return Curve(
        "effective gap(q)",
        r"E_{\mathrm{eff}}(t)",
        "t",
        tuple(t.tolist()),
        tuple(y.tolist()),
        tuple(error.tolist()),
        style="gap",
        plateau=(1.0003, 0.0034, 0.8, 2.3),
    )


@pytest.fixture
def sampled() -> Report:
    return Report(
        kind="sample",
        title="oscillator, sampled",
        action_text="q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2",
        latex=r"S_E=\int d\tau\,\left[\tfrac12\dot q^2+\tfrac12 w^2q^2\right]",
        couplings=(("w", 1.0),),
        rows=(
            Row("<q^2>", r"\langle q^2\rangle", 0.49962, 0.00121, 0.5, -0.31, 0.63, 0.021, 12400.2),
            Row("<q(1) q(0)>_c", r"\langle q(1)q(0)\rangle_c", -12.2613, 0.213, -12.25, -0.05, 0.71, None, 980.0),
            Row("gap(q)", r"\Delta E", 1.0003, 0.0034, 1.0, 0.09, remark="three windows, averaged"),
            Row("binder", "U", 0.41234, 0.0001, 0.4, 123.0, state="unresolved", remark="run ten times longer"),
            Row(
                "<Q^2>",
                r"\langle Q^2\rangle",
                0.77,
                0.01,
                state="withheld",
                remark="the winding number changed 3 times",
            ),
        ),
        curves=(oscillator_correlator(41), effective_gap(31)),
        warnings=("binder: the autocorrelation time could not be resolved.",),
        facts=(("method", "Hamiltonian Monte Carlo"), ("chains", "64 x 400 draws")),
        record_name="3fa2c19b77e0" + "0" * 52,
        record={"schema": "quarterturn-record/1"},
    )


@pytest.fixture
def solved() -> Report:
    x = np.linspace(-4, 4, 161)
    grid = tuple(x.tolist())
    waves = [
        np.exp(-(x**2) / 2) / math.pi**0.25,
        math.sqrt(2) * x * np.exp(-(x**2) / 2) / math.pi**0.25,
    ]
    return Report(
        kind="levels",
        title="oscillator, levels",
        action_text="q(t)\nL = 1/2 q'^2 - 1/2 q^2",
        latex="S_E",
        couplings=(),
        rows=tuple(Row(f"E_{n}", f"E_{n}", n + 0.5, 2e-13) for n in range(2)),
        curves=(
            Curve("V(q)", "V(q)", "q", grid, tuple((x**2 / 2).tolist()), style="potential"),
            *(
                Curve(f"psi_{n}", rf"\psi_{n}", "q", grid, tuple(y.tolist()), style="wave", baseline=n + 0.5)
                for n, y in enumerate(waves)
            ),
        ),
    )
