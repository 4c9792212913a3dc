"""The coupled stack: all rows of all cases at once, streams in counterflow, modules wired into strings.

Unknowns are the stream temperatures at the row boundaries, four metal temperatures a row, the current of each block of
rows and the bus voltage. One pass of the method evaluates properties, films and module parameters, makes each row a
linear two-port between its two entering streams, joins the rows by one backward and one forward sweep (a scalar
reflection coefficient, stable for spent streams), carries the same sweeps for the derivative in each block's current,
and takes Newton's step on currents and voltage. Properties, films and heat capacity rates enter with secant slopes from
the passes before, so that the whole converges faster than linearly. Cases that have converged leave the batch.

All heat flows inside are those of one place (one module); a row split in segments sees its stream as that many times
larger, which is the same thing.
"""

from harvest.model.stack.problem import (
    Circuit,
    Load,
    StackProblem,
    StackSide,
    StackState,
)
from harvest.model.stack.solver import solve_stack

__all__ = [
    "Circuit",
    "Load",
    "StackProblem",
    "StackSide",
    "StackState",
    "solve_stack",
]
