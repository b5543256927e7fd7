"""What results say about their units: beside a coupling, along an axis, among the facts."""

from __future__ import annotations

from quarterturn.actions.in_units import HBAR, known
from quarterturn.actions.model import Action
from quarterturn.units.constants import release
from quarterturn.units.quantity import UNKNOWN, Quantity


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
