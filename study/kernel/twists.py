"""First rates of a pose by implicit differentiation: J · twist = −∂F/∂input, never by finite differences."""

import numpy as np

from study.kernel.rows import tyre_roll_rate
from study.kernel.solve import factor, solve_each, substitute

LEAST_PIVOT = 1e-3  # rows are near unit length: a smaller pivot means that the nominal's order does not suit this build


def right_sides(rows, road, pose, jacobian, inputs):
    """−∂F/∂input (6, k, N) for the named inputs, in mm per mm of road rise, per radian of roll, per mm of rack.

    bump: 1 on every tyre row (h grows by the rise); roll: see `tyre_roll_rate`; rack: û_y on the links it carries,
    û being the link's unit vector, which stands in the Jacobian already.
    """
    nl, n = rows.link_length.shape[0], rows.count
    tyres = slice(n - rows.wheel_centre.shape[1], n)
    out = np.zeros((n, len(inputs), pose.t.shape[1]))
    for k, name in enumerate(inputs):
        if name == "bump":
            out[tyres, k] = 1.0
        elif name == "roll":
            out[tyres, k] = tyre_roll_rate(rows, road, pose.rotation, pose.t)
        else:
            out[:nl, k] = rows.rack * jacobian[:nl, 1]
    return out


def twists(rows, road, pose, jacobian, *, order, inputs):
    """Twists (k, 6, N) for the named inputs.

    A twist is (v, ω): mm and radians per unit of the input, v of the body's origin.
    """
    lu = factor(jacobian[order.rows][:, order.columns])
    right = right_sides(rows, road, pose, jacobian, inputs)
    out = np.empty((len(inputs), 6, pose.t.shape[1]))
    out[:, order.columns] = substitute(lu, right[order.rows]).swapaxes(0, 1)
    poor = np.flatnonzero(~(np.abs(lu[np.arange(6), np.arange(6)]).min(axis=0) > LEAST_PIVOT))
    if len(poor):
        out[:, :, poor] = solve_each(jacobian[..., poor], right[..., poor]).swapaxes(0, 1)
    return out
