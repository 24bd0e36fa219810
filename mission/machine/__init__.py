"""Machine: rows of a duty -> ``OperatingPoints`` of the inverter."""

from .induction import InductionState, VfRows, induction_state, magnetising_current_a, state_at_voltage, torque_of_state_nm
from .points import OperatingPoints, Shortfall, operating_points
from .spec import CurrentTable, DirectPoints, DqTable, InductionMachine, InductionVf, MachineSpec, MagnetisingTable, SynchronousMachine
from .synchronous import dq_voltages_v, flux_linkages_wb, largest_torque, mtpa_from_current, mtpa_from_torque, torque_of_currents_nm

__all__ = [
    "CurrentTable",
    "DirectPoints",
    "DqTable",
    "InductionMachine",
    "InductionState",
    "InductionVf",
    "MachineSpec",
    "MagnetisingTable",
    "OperatingPoints",
    "Shortfall",
    "SynchronousMachine",
    "VfRows",
    "dq_voltages_v",
    "flux_linkages_wb",
    "induction_state",
    "largest_torque",
    "magnetising_current_a",
    "mtpa_from_current",
    "mtpa_from_torque",
    "operating_points",
    "state_at_voltage",
    "torque_of_currents_nm",
    "torque_of_state_nm",
]
