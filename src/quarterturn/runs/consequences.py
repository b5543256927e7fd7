"""What can be asked of a spectrum beyond what its action measures; `Levels` has these methods."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Symbol
from quarterturn.actions.model import Action, Bracket
from quarterturn.errors import RequestError
from quarterturn.imaginary.binding import local_function
from quarterturn.imaginary.fixed_ends import from_levels, propagated
from quarterturn.imaginary.lines import lines
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.products import euclidean_product
from quarterturn.imaginary.rotation import OnTheArc, arc
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.systems import system_of
from quarterturn.imaginary.thermodynamics import thermodynamics
from quarterturn.runs.following import Context, Kernel, RealTime, Response, SpectralLines, ThermodynamicsTable
from quarterturn.runs.operators import measured, operator, point

Floats = NDArray[np.float64]
Place = float | Sequence[float]  # one number for each degree of freedom
LONGEST_TURN = 4.0  # radius of the arc on which the quarter turn is checked, over the lowest frequency
FREQUENCIES = 401
SPAN, SHARP = 1.5, 100.0  # of a response: up to so many times its heaviest line, and width a part of it


class Consequences:
    """Methods of a solved spectrum. Thermal where the spectrum is, by `at(beta)`."""

    action: Action
    couplings: Mapping[str, float]
    spectrum: Any
    beta: float | None

    def matrix_element(self, f: str, m: int, n: int) -> float | complex:
        """<m| f(q) |n> between levels m and n, such as matrix_element("q", 0, 1)."""
        return self._solved().matrix_element(self._function(f), m, n)

    def thermodynamics(self, beta: Any = None) -> ThermodynamicsTable:
        """Partition function, free energy, energy, entropy and heat capacity.

        Parameters
        ----------
        beta
            Inverse temperature, or several; may be left out at a temperature.

        Raises
        ------
        SpectrumError
            A continuum, or a temperature that needs more levels than can be had.
        """
        betas: Any = self.beta if beta is None else beta
        if betas is None:
            raise RequestError("beta is missing: thermodynamics(beta=2), or a list of inverse temperatures")
        return ThermodynamicsTable(self._context(), thermodynamics(self._solved(), betas))

    def propagator(self, q_b: Place, q_a: Place, beta: float | None = None) -> Kernel:
        """K(q_b, beta; q_a, 0) = <q_b| exp(-beta H) |q_a>, from the levels and by split-operator propagation.

        Both values carry an error, and share the potential alone.

        Raises
        ------
        SpectrumError
            A continuum, too short a beta, an end outside the region that the levels fill, or three paths.
        """
        length = self.beta if beta is None else beta
        if length is None or not (np.isfinite(length) and length > 0):
            raise RequestError(f"beta must be a positive imaginary time between the two ends, got {length!r}")
        degrees = len(self.action.euclidean.variables)
        late, early = (point(word, q, degrees) for word, q in (("q_b", q_b), ("q_a", q_a)))
        summed = from_levels(self._solved(), late, early, float(length))
        stepped = propagated(system_of(self.action.euclidean, self.couplings), late, early, float(length))
        return Kernel(self._context(), late, early, float(length), summed, stepped)

    def euclidean(self, label: str) -> float | complex:
        """A Euclidean time-ordered product of any number of factors, such as "<q(2) q(1.5) q(0.5) q(0)>".

        Connected products and formulas are understood; curves are in spec["…"].
        """
        found = measured(self.action, label)
        if any(b.free for b in found.brackets) or found.kind != "number":
            raise RequestError(f"euclidean takes fixed times only, as in '<q(1) q(0)>', got {label!r}")
        solved = self._solved()
        values = [self._product(solved, bracket) for bracket in found.brackets]
        value = found.formula.evaluate(self._lookup(values), np)
        return complex(value) if np.iscomplexobj(value) else float(value)

    def real_time(self, label: str, times: Any) -> RealTime:
        """A two-time correlator at real times, time-ordered.

        Parameters
        ----------
        label
            As in a measurement, with the free time t: "<q(t) q(0)>", "<q(t)^2 q(0)^2>_c".
        times
            Real times of either sign.

        Returns
        -------
        RealTime
            Complex values. In the vacuum t stands for t (1 - i eps); that turning the Euclidean correlator by a quarter
            gives the same is checked by propagation through complex time (of one path), and reported.

        Raises
        ------
        RequestError
            A label without the free time, or with more than two times.
        SpectrumError
            A continuum.
        """
        found = measured(self.action, label)
        if not any(b.free for b in found.brackets):
            raise RequestError(f"a real-time correlator has the free time t, as in '<q(t) q(0)>', got {label!r}")
        t = np.atleast_1d(np.asarray(times, dtype=np.float64))
        if t.ndim != 1 or not np.isfinite(t).all():
            raise RequestError("times must be a list of finite numbers")
        solved = self._solved()
        values: list[Any] = []
        error = 0.0
        turn: tuple[OnTheArc, ...] = ()
        for bracket in found.brackets:
            if not bracket.free:
                values.append(self._product(solved, bracket))
                continue
            f, g = self._pair(bracket)
            pair = lines(solved, f, g, self.beta)
            values.append(pair.time_ordered(t))
            error += pair.error(float(np.max(np.abs(t))))
            if self.beta is None and not turn:
                turn = self._turned(solved, f, g, t)
        value = np.broadcast_to(found.formula.evaluate(self._lookup(values), np), t.shape).astype(np.complex128)
        return RealTime(self._context(), found.label, t, value, error, turn)

    def spectral(self, f: str, g: str | None = None) -> SpectralLines:
        """The lines of <f(t) g(0)>; g is f where it is left out. Their weights add up to <f g>.

        Raises SpectrumError where a continuum begins.
        """
        g = f if g is None else g
        found = lines(self._solved(), self._function(f), self._function(g), self.beta)
        return SpectralLines(self._context(), f"<{_at(f, 't')} {_at(g, '0')}>", found)

    def response(
        self, f: str, g: str | None = None, *, frequencies: Any = None, width: float | None = None
    ) -> Response:
        """Linear response of <f> to a source J(t) that couples as H - J g; g is f where it is left out.

        Parameters
        ----------
        f, g
            Functions of the path, such as "q" and "q^2".
        frequencies
            Where chi(w) is wanted; past the heaviest line where they are left out.
        width
            Imaginary part of the frequency; the retarded response is its limit to zero.

        Raises
        ------
        SpectrumError
            A continuum.
        """
        g = f if g is None else g
        found = lines(self._solved(), self._function(f), self._function(g), self.beta)
        omega, weights = found.commutator
        heaviest = float(abs(omega[np.argmax(np.abs(weights))])) if len(omega) else 1.0
        if width is not None and not (np.isfinite(width) and width >= 0):
            raise RequestError(f"width must not be negative, got {width!r}")
        at = np.linspace(0, SPAN * heaviest, FREQUENCIES) if frequencies is None else frequencies
        part = heaviest / SHARP if width is None else float(width)
        values = np.atleast_1d(np.asarray(at, dtype=np.float64))
        if part == 0 and len(omega) and np.isclose(values[:, None], omega[None, :], rtol=1e-12, atol=0).any():
            raise RequestError("width = 0 on a line: the response is infinite there")
        return Response(self._context(), f"of <{f}> to a source of {g}", values, part, found)

    # --- parts ------------------------------------------------------------------------------------------------
    def _solved(self) -> Spectrum:
        if self.spectrum is None:
            raise RequestError("at a finite spacing there is no continuous time: leave spacing='lattice' out")
        solved: Spectrum = self.spectrum
        return solved

    def _function(self, words: str) -> Local:
        return local_function(operator(self.action, words), self.action.euclidean, self.couplings)

    def _lookup(self, values: list[Any]) -> dict[Atom, Any]:
        lookup: dict[Atom, Any] = {Symbol("coupling", name): value for name, value in self.couplings.items()}
        lookup.update({Symbol("bracket", str(i)): value for i, value in enumerate(values)})
        return lookup

    def _product(self, solved: Spectrum, bracket: Bracket) -> float | complex:
        if bracket.over != "sites":
            raise RequestError(f"{bracket.label} is no product of the path at fixed times")
        factors = [
            (float(time or 0), local_function(e, self.action.euclidean, self.couplings)) for time, e in bracket.groups
        ]
        return euclidean_product(solved, factors, self.beta)

    def _pair(self, bracket: Bracket) -> tuple[Local, Local]:
        if len(bracket.groups) != 2:
            raise RequestError(f"a real-time correlator has two times, t and 0, not those of {bracket.label}")
        by_time = {time: local_function(e, self.action.euclidean, self.couplings) for time, e in bracket.groups}
        if set(by_time) != {None, 0}:
            raise RequestError(f"beside the free time t one factor stands at 0, not as in {bracket.label}")
        return by_time[None], by_time[next(time for time in by_time if time is not None)]

    def _turned(self, solved: Spectrum, f: Local, g: Local, t: Floats) -> tuple[OnTheArc, ...]:
        if len(self.action.euclidean.variables) > 1:
            return ()
        found = lines(solved, f, g)
        moving = found.frequencies[found.frequencies > 1e-9 * np.max(found.frequencies, initial=0.0)]
        radius = min(float(np.max(np.abs(t))), LONGEST_TURN / float(moving[0]) if len(moving) else 1.0)
        if radius == 0:
            return ()
        return tuple(arc(solved, found, system_of(self.action.euclidean, self.couplings), f, g, radius))

    def _context(self) -> Context:
        return Context.of(self.action, self.couplings, self.beta)


def _at(words: str, time: str) -> str:
    return f"{words}({time})" if words.isidentifier() else f"({words})({time})"
