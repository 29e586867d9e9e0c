"""Many trials pooled into one effect.

The numeric core: arrays or pandas in, frozen values out, effects on the analysis scale.
"""

from treering.pooling.inverse_variance import pool, pool_many
from treering.pooling.result import PooledEffect

__all__ = ["PooledEffect", "pool", "pool_many"]
