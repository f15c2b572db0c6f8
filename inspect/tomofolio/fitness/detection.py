"""The rule by which a spot counts as found: stated once, used to find spots and to say which would be found.

The mean of 3 × 3 × 3 voxels must differ from the local level by `FALSE_CALL_DEVIATIONS` of its standard deviations
and by `SMALLEST_SHARE` of the contrast.
"""

from __future__ import annotations

#: For normal noise one voxel in 10⁸ differs by 5.6; the rest is for noise that is not quite normal.
FALSE_CALL_DEVIATIONS = 6.0
#: Fainter structure is the material's own and not reported.
SMALLEST_SHARE = 0.1
