"""Kelvinledger: from what a motor drive does to what its power module's chips feel and how long they live.

The names below are loaded on first use, so that ``import mission`` is light.

>>> import mission
>>> mission.__version__
'0.1.0'
"""

from importlib import import_module as _import_module

__version__ = "0.1.0"

_WHERE = {
    "load_study": "study", "run": "study", "compare": "study", "RatingBench": "study", "rating_point": "study", "Study": "study", "MissionResult": "study",
    "read_profile": "duty", "profile_from_frame": "duty", "MissionProfile": "duty",
    "load_module": "device", "PowerModule": "device", "save_module": "device",
    "Modulation": "losses", "leg_losses_w": "losses",
    "load_model": "lifetime",
    "InputError": "errors", "RangeError": "errors", "MissionError": "errors", "NoStableTemperature": "errors",
}

__all__ = ["__version__", *_WHERE]


def __getattr__(name):
    if name in _WHERE:
        return getattr(_import_module(f".{_WHERE[name]}", __name__), name)
    raise AttributeError(f"module 'mission' has no attribute '{name}'")


def __dir__():
    return sorted(__all__)
