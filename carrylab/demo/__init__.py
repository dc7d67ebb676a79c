"""The invented world of the demo data: eleven economies, 360 months, made from one seed."""

from carrylab.demo.clean import write_clean
from carrylab.demo.dirty import write_dirty
from carrylab.demo.world import World, world

# Chosen among a thousand so that the one sample users see stays near the population values.
SEED = 2795

__all__ = ["SEED", "World", "world", "write_clean", "write_dirty"]
