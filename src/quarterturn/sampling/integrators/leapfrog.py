"""The leapfrog: half a rotation, a kick, half a rotation. Second order, one kick a step.

Source: Duane, Kennedy, Pendleton and Roweth, Phys. Lett. B 195 (1987) 216; with the harmonic part rotated exactly.
"""

from quarterturn.sampling.integrators.splitting import Splitting

LEAPFROG = Splitting("leapfrog", (0.5, 0.5), (1.0,))
