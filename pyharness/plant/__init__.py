"""The plant in float64: orbit, geomagnetic field, rigid body, coils and sensors, over a batch of
spacecraft."""

from pyharness.plant.cycle import Timeline
from pyharness.plant.field import ConstantField
from pyharness.plant.health import CoilHealth
from pyharness.plant.plant import Plant, Sample, Snapshot

__all__ = ["CoilHealth", "ConstantField", "Plant", "Sample", "Snapshot", "Timeline"]
