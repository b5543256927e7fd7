"""What results say about their units: beside a coupling, along an axis, among the facts."""

from __future__ import annotations

from quarterturn.actions.dimensions import times
from quarterturn.actions.in_units import HBAR, known
from quarterturn.actions.model import Action
from quarterturn.units.constants import release
from quarterturn.units.quantity import UNKNOWN, Quantity

# numbers of a saddle, as powers of an energy; the tension of a wall depends on the coordinates it is measured in
POWERS = {
    "S": 0, "S, thin wall": 0, "negative modes": 0, "zero modes": 0, "det/det_0": 0, "det/det_0, on a lattice": 0,
    "omega": 1, "V_b": 1, "T_c": 1, "K exp(-S)": 1, "E_1 - E_0": 1, "width of the band": 1, "decay rate": 1,
    "duration": -1, "radius": -1, "thickness": -1, "lambda_-": 2,
}  # fmt: skip


def counted(action: Action, name: str) -> str:
    """The mass dimension of a coupling, or its unit where units have names."""
    words = action.couplings[name].quantity.words
    return f"{words} (from {release()})" if known(action, name) else words


def step(action: Action) -> Quantity:
    """What imaginary time counts."""
    return action.system.quantity(action.system.step)


def level(action: Action) -> Quantity:
    """What the energy of a state counts."""
    return action.system.quantity(action.system.level)


def of_saddle(action: Action, label: str, zero_modes: float) -> Quantity:
    """What a number of a saddle counts; the determinant without zero modes lacks an eigenvalue for each."""
    if label.startswith("det'/det_0"):
        return action.system.quantity(times(action.system.level, -2 * int(zero_modes)))
    if label in POWERS:
        return action.system.quantity(times(action.system.level, POWERS[label]))
    field = action.paths[0]
    return field.quantity if label in ("false vacuum", f"{field.name}(0)") else action.system.quantity(None)


def along(action: Action, variable: str = "t") -> str:
    """An axis and its unit, where it has a name."""
    quantity = step(action)
    if variable != "t":
        quantity = next((p.quantity for p in action.paths if p.name == variable), UNKNOWN)
    return f"{variable} [{quantity.name}]" if quantity.name else variable


def lattice_units(action: Action) -> str:
    """What a and beta count, behind the lattice in words."""
    name = step(action).name
    return f"; a and beta in {name}" if name and action.geometry else ""


def facts(action: Action) -> tuple[tuple[str, str], ...]:
    """The line about units in a report; none in natural units with a free scale."""
    if action.units is None:
        return ()
    hbar = f", hbar = {action.couplings[HBAR].default:.10g}" if action.system.laboratory else ", hbar = c = 1"
    words = f"{', '.join(action.units.names)}{hbar}; energies in {level(action).name}, imaginary time in "
    return (("units", f"{words}{step(action).name}; constants of {release()}"),)
