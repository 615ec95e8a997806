"""Methods that design a mask, and the one driver that runs them."""

from collections.abc import Callable
from typing import Any

from doe.config.solver import GerchbergSaxton, Gradient, Stepwise, Weighted
from doe.solvers.gerchberg_saxton import gerchberg_saxton
from doe.solvers.gradient import gradient
from doe.solvers.method import Method
from doe.solvers.stepwise import stepwise
from doe.solvers.weighted import weighted

METHODS: dict[type, Callable[[Any], Method]] = {
    Gradient: gradient,
    GerchbergSaxton: gerchberg_saxton,
    Weighted: weighted,
    Stepwise: stepwise,
}
