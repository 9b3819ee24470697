"""Closed-form fields along a scan line: the truth a simulated bench measures.

Every source knows its field ``B(s)`` and its exact running integral ``F(s)``, so that a
reduction of simulated readings can be judged against numbers without quadrature error.
Sources add, scale and shift: ``Loop(0.1, 50.0).shifted(0.3) + 2.0 * Uniform(1e-5)``.
"""

from fieldmap.bench.sources.algebra import Scaled, Shifted, Source, Sum, Uniform
from fieldmap.bench.sources.blocks import Block, Slot
from fieldmap.bench.sources.edges import EngeMagnet, Plates, TanhMagnet, TwoTermEnge
from fieldmap.bench.sources.loops import Loop, Solenoid, loop_field

__all__ = [
    "Block",
    "EngeMagnet",
    "Loop",
    "Plates",
    "Scaled",
    "Shifted",
    "Slot",
    "Solenoid",
    "Source",
    "Sum",
    "TanhMagnet",
    "TwoTermEnge",
    "Uniform",
    "loop_field",
]
