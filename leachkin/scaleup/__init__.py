"""Scale-up: what tanks and heaps make of an ore's law."""

from leachkin.scaleup.bands import Bands, bands
from leachkin.scaleup.batch_leach import BatchLeach, batch_leach
from leachkin.scaleup.heap import HeapResult, heap
from leachkin.scaleup.lengthen import lengthen
from leachkin.scaleup.tanks import TankTrain, tank_train

__all__ = [
    "Bands",
    "BatchLeach",
    "HeapResult",
    "TankTrain",
    "bands",
    "batch_leach",
    "heap",
    "lengthen",
    "tank_train",
]
