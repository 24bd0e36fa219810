"""Machine: rows of a duty -> ``OperatingPoints`` of the inverter."""

from .points import OperatingPoints, operating_points
from .spec import DirectPoints, MachineSpec, SynchronousMachine
from .synchronous import dq_voltages_v, mtpa_from_current, mtpa_from_torque, torque_of_currents_nm

__all__ = [
    "DirectPoints",
    "MachineSpec",
    "OperatingPoints",
    "SynchronousMachine",
    "dq_voltages_v",
    "mtpa_from_current",
    "mtpa_from_torque",
    "operating_points",
    "torque_of_currents_nm",
]
