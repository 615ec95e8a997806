"""Huygens' construction, wavelet by wavelet: the referee of all propagators."""

from doe.direct_sum.nodes import nodes_per_side
from doe.direct_sum.wavelets import cylindrical_sum, rayleigh_sommerfeld, terms

__all__ = ["cylindrical_sum", "nodes_per_side", "rayleigh_sommerfeld", "terms"]
