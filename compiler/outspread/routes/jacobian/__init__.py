"""As many outputs as inputs: every branch of the inverse, the Jacobian, the joint density at any point."""

from outspread.routes.jacobian.branches import solve_for
from outspread.routes.jacobian.checks import NotPossible
from outspread.routes.jacobian.density import input_density
from outspread.routes.jacobian.joint import derive_joint

__all__ = ["NotPossible", "derive_joint", "input_density", "solve_for"]
