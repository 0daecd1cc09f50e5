"""Second-order reliability: curvatures at the design point and what they do to the probability."""

from calibrate.reliability.second_order.asymptotic import breitung, hohenbichler_rackwitz, tvedt
from calibrate.reliability.second_order.curvatures import principal_curvatures
from calibrate.reliability.second_order.paraboloid import paraboloid
from calibrate.reliability.second_order.result import SecondOrder
from calibrate.reliability.second_order.sorm import second_order

__all__ = [
    "SecondOrder",
    "breitung",
    "hohenbichler_rackwitz",
    "paraboloid",
    "principal_curvatures",
    "second_order",
    "tvedt",
]
