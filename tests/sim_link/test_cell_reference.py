"""The cell against PyBaMM, a general-purpose battery library: its equivalent-circuit model.

Same open-circuit curve, same resistances, same current over time; PyBaMM integrates the circuit as
a differential equation. Asked for are 20 mV; the largest difference found is 16 uV.
"""

import os
from typing import Any

import numpy as np
import pytest

from sim_link.cell import CHARGES, VOLTAGES, Cell

os.environ.setdefault("PYBAMM_DISABLE_TELEMETRY", "true")
pybamm = pytest.importorskip("pybamm", reason="needs the extra 'reference'")
pytestmark = pytest.mark.reference

CAPACITY_MAH, SERIES_OHM, RC_OHM, RC_S = 500.0, 0.12, 0.08, 30.0
START = 0.95
PULSES = [(0.05, 60), (2.0, 5), (0.05, 60), (0.0, 120), (3.0, 4), (0.4, 400), (1.5, 30)] * 4
"""Currents in amperes, and for how many seconds: idle, spin-ups, rest, a long drive."""


def currents() -> list[float]:
    return [current for current, seconds in PULSES for _ in range(seconds)]


def ours() -> list[float]:
    """Terminal voltage at the end of each second, under that second's current."""
    cell = Cell(CAPACITY_MAH, SERIES_OHM, START, rc_ohm=RC_OHM, rc_s=RC_S)
    voltages = []
    for current in currents():
        power_W = current * (cell.open_circuit_V - cell.rc_V - SERIES_OHM * current)
        cell.drain(power_W, power_W, 1.0)
        voltages.append(cell.open_circuit_V - cell.rc_V - SERIES_OHM * current)
    return voltages


def theirs() -> list[float]:
    """The same by PyBaMM's Thevenin model with one RC element, kept at one temperature."""
    steps = currents()
    turns = [t for i in range(1, len(steps)) for t in (i - 1e-3, i + 1e-3)]
    edges = np.array([0.0, *turns, len(steps)])
    levels = np.repeat(steps, 2)
    current: Any = pybamm.Interpolant(edges, levels, pybamm.t, interpolator="linear")

    def curve(charge: Any) -> Any:
        return pybamm.Interpolant(
            np.array(CHARGES), np.array(VOLTAGES), charge, interpolator="linear"
        )

    values = pybamm.equivalent_circuit.Thevenin().default_parameter_values
    values.update(
        {
            "Initial SoC": START,
            "Cell capacity [A.h]": CAPACITY_MAH / 1e3,
            "Nominal cell capacity [A.h]": CAPACITY_MAH / 1e3,
            "Current function [A]": current,
            "Open-circuit voltage [V]": curve,
            "R0 [Ohm]": SERIES_OHM,
            "R1 [Ohm]": RC_OHM,
            "C1 [F]": RC_S / RC_OHM,
            "Entropic change [V/K]": 0.0,
            "Lower voltage cut-off [V]": 2.5,
            "Upper voltage cut-off [V]": 4.5,
        }
    )
    simulation = pybamm.Simulation(pybamm.equivalent_circuit.Thevenin(), parameter_values=values)
    times = [i + 1 - 2e-3 for i in range(len(steps))]
    solution = simulation.solve(edges, t_interp=times)  # stops at each change of the current
    return [float(value) for value in solution["Voltage [V]"](times)]


def test_terminal_voltage_over_a_discharge_with_pulses() -> None:
    mine, reference = ours(), theirs()
    worst_V = max(abs(a - b) for a, b in zip(mine, reference, strict=True))
    assert max(reference) - min(reference) > 0.5  # pulses and a good part of the curve
    assert worst_V < 1e-4
