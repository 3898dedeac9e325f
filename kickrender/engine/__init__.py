"""What a circuit does when struck: its equations, its rest state and its motion.

Importing this package imports numba (about half a second); the first solve ever compiles the kernels, which are
then kept on disk.
"""

from kickrender.engine.compile import is_compiled
from kickrender.engine.linearise import response
from kickrender.engine.poles import Pole, poles
from kickrender.engine.solution import Solution
from kickrender.engine.solve import DEFAULT_TOLERANCE, ENGINE_VERSION, rest_state, solve, solve_each
from kickrender.engine.warm_up import warm_up

__all__ = [
    "DEFAULT_TOLERANCE",
    "ENGINE_VERSION",
    "Pole",
    "Solution",
    "is_compiled",
    "poles",
    "response",
    "rest_state",
    "solve",
    "solve_each",
    "warm_up",
]
