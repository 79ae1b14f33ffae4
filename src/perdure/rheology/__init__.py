"""Physics: histories, clocks and laws. Knows no statistics and no files; numpy and numba only."""

from perdure.rheology.kernel_cache import use_kernel_cache

use_kernel_cache()
