"""Chips on a common plate: each chip's layers end on a plate that is solved in three dimensions.

The heat of a chip goes down its own ladder and enters the plate evenly over the face that its layers end with; the ladder ends at
the mean temperature of that face. Below the plate the paste is an even area resistance to a surface of one temperature, where the
sink begins. The plate is a :class:`mission.thermal.fourier.FourierStack`: its modes become a body of the network.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from ..device import PowerModule, chip_faces
from ..errors import InputError, RangeError
from .assembly import FullNetwork, NetworkBuilder, Spot
from .cooling import sink_path
from .fourier import FourierNetwork, FourierStack, Source, plate_layers
from .layers import StackLadder, load_materials
from .networks import CauerLadder

#: Shortest time at which the plate must be right [s]: the chip's layers let nothing through to it sooner.
FASTEST_S = 1e-4
#: Factors on the paste for which the modes of the plate are right to 1 % of a chip's rise over the sink.
PASTE_LOW, PASTE_HIGH = 0.5, 2.5


class PlateBody(NamedTuple):
    """A plate as nodes of a network.

    Attributes
    ----------
    c_j_per_k : ndarray, shape (m,)
        All alike; together what plate and faces hold.
    g_w_per_k : ndarray, shape (m, m)
        To the surface below the paste, see :meth:`mission.thermal.NetworkBuilder.body`.
    face, below : ndarray, shape (n, m)
        Weights of the nodes in the mean temperature of a chip's face, and of its shadow on the plate's lower face.
    """

    c_j_per_k: np.ndarray
    g_w_per_k: np.ndarray
    face: np.ndarray
    below: np.ndarray


def plate_body(plate: FourierNetwork, c_face_j_per_k, *, paste: float = 1.0) -> PlateBody:
    """A plate's modes as a body whose nodes all stand at 1 K when everything does.

    Parameters
    ----------
    plate : FourierNetwork
    c_face_j_per_k : array_like, shape (n,)
        Heat capacity that sits on every face, such as the last half cell of the chip's ladder.
    paste : float
        Factor on the resistance under the plate, 0.5 to 2.5. Nodes are the same for every factor, so that temperatures can be carried over.

    Notes
    -----
    Modes z decay as z' = -L z + B q, with B the weights of the faces. The faces' capacities make the mass 1 + sum of c b b'; its root is taken into
    the state. A reflection then turns the state of even temperature into one with equal parts, after which every node has the same
    share of the capacity and all is an ordinary network: rows of weights add up to 1, heat is the sum of c T.
    """
    if not PASTE_LOW <= paste <= PASTE_HIGH:
        raise RangeError("grease", f"{paste:.3g} times the case-to-sink resistance under a plate", f"{PASTE_LOW:g} to {PASTE_HIGH:g} times",
                         "enter the resistance of the aged grease as case_to_sink.r_th_k_per_w")
    _, face, below, even = plate.modes()
    m = even.size
    mass, turn = np.linalg.eigh(np.eye(m) + face.T @ (np.asarray(c_face_j_per_k, float)[:, None] * face))
    root = (turn / np.sqrt(mass)) @ turn.T
    even = (turn * np.sqrt(mass)) @ (turn.T @ even)
    size = np.sqrt(even @ even)
    mirror = even - size / np.sqrt(m)
    mirror /= np.sqrt(mirror @ mirror)
    # T = shape @ temperatures of the nodes
    shape = size / np.sqrt(m) * (root - 2.0 * np.outer(root @ mirror, mirror))
    g = shape.T @ plate.conductance_w_per_k(paste * plate.r_under_k_per_w) @ shape
    return PlateBody(np.full(m, size**2 / m), 0.5 * (g + g.T), face @ shape, below @ shape)


def plate_stack(module: PowerModule, cooling=None, *, materials=None, leg: int = 0) -> FourierStack:
    """The plate of a module with its chips, for steady maps of its temperature.

    Parameters
    ----------
    module : PowerModule
        With a section ``[plate]``.
    cooling : FixedCooling, FosterCooling or SinkPath, optional
        What lies below. Without it the stack ends at the sink's surface, which has one temperature as in :func:`mission.thermal.inverter_network`: give
        that to the maps as the coolant's.
    materials : dict of Material, optional
        Default: the shipped ones.
    leg : int
        Which of three sinks, where the cooling has one for every module.

    Returns
    -------
    FourierStack
        Sources are named and ordered as :func:`mission.device.plate_chip_names`. With ``cooling`` paste and sink are one even area resistance: the sink
        carries no heat sideways, so loaded chips come out warmer than on a surface of one temperature. A sink that three modules share counts threefold:
        each is taken to give off the same heat.

    Examples
    --------
    >>> from mission.device import load_module
    >>> stack = plate_stack(load_module("avocet-300"))
    >>> stack.sources[0].name, stack.n_sources
    ('S-a-up', 12)
    """
    if module.plate is None:
        raise InputError("module", f"{module.name}, which has no section plate", "a module with chips on a plate")
    if not 0 <= leg < 3:
        raise RangeError("leg", f"{leg}", "0, 1 or 2")
    plate = module.plate
    materials = load_materials() if materials is None else materials
    r_below = module.case_to_sink.r_th_k_per_w
    if cooling is not None:
        path = sink_path(cooling)
        each = len(path.ladders) > 1
        sink = path.ladders[leg if each else 0]
        shared = 1 if each or module.arrangement == "six-pack" else 3
        r_below = path.paste * r_below + shared * (float(sink.r_k_per_w.sum()) if isinstance(sink, CauerLadder) else sink)
    sources = tuple(Source(f.x_mm, f.y_mm, f.width_mm, f.length_mm, f.name) for f in chip_faces(module))
    return FourierStack(plate.width_mm, plate.length_mm, plate_layers(plate.layer, materials, where="plate.layer"), sources,
                        r_below * plate.width_mm * plate.length_mm)


def plated_network(builder: NetworkBuilder, surfaces: list[int], module: PowerModule, stacks: list[StackLadder], materials, paste: float) -> FullNetwork:
    """Network of a bridge whose chips stand on plates: one plate under a six-pack, else one for each leg.

    Parameters
    ----------
    builder : NetworkBuilder
        Holds the sinks already.
    surfaces : list of int
        Mounting surfaces: one, or one for each leg.
    module : PowerModule
    stacks : list of StackLadder
        Layers of every pair of chips, in the order of ``module.chip_pairs()``.
    materials : dict of Material
    paste : float
        Factor on the resistance of the paste.
    """
    stack = plate_stack(module, materials=materials)
    six_pack = module.arrangement == "six-pack"
    per_pair = 6 if six_pack else 2
    body = plate_body(stack.network(fastest_s=FASTEST_S), np.repeat([s.c_end_j_per_k for s in stacks], per_pair), paste=paste)
    firsts = [builder.body(body.c_j_per_k, body.g_w_per_k, surface) for surface in (surfaces if six_pack or len(surfaces) > 1 else 3 * surfaces)]
    heated, cases = [], []
    for chip in range(6 * len(stacks)):
        pair, place = divmod(chip, 6)
        first, number = (firsts[0], chip) if six_pack else (firsts[place // 2], 2 * pair + place % 2)
        heated.append(builder.ladder(stacks[pair].ladder, Spot(first, body.face[number])))
        cases.append(Spot(first, body.below[number]))
    return builder.build(heated, cases, surfaces)
