"""The minimum-norm second-order splitting: two kicks a step, an error constant some ten times smaller.

Source: Omelyan, Mryglod and Folk, Comput. Phys. Commun. 151 (2003) 272, eq. (31): lambda = 0.1931833275037836.
"""

from quarterturn.sampling.integrators.splitting import Splitting

LAMBDA = 0.1931833275037836
MINIMUM_NORM = Splitting("minimum norm", (LAMBDA, 1 - 2 * LAMBDA, LAMBDA), (0.5, 0.5))
