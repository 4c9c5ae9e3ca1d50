"""The stack file: the layers of a die from the top down, their features, and its regions.

All lengths are held in nm. A `Measure` carries value, sd and across-die sd.
"""

from __future__ import annotations
