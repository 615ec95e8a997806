"""The order table as CSV."""

import csv
import io
import math

import numpy as np

from doe import sampling
from doe.config import derived
from doe.result import Result

NAME = "orders.csv"
SMALLEST = 1e-6  # weaker orders are left out, wanted ones never


def order_csv(result: Result) -> bytes:
    """Wanted orders and all with power, strongest first; places behind a lens in metres."""
    table, config = result.orders, result.config
    steps, focal_length = derived.order_steps(config), config.plane.focal_length
    head = ["m_y", "m_x", "power", "target_share", "s_y", "s_x"]
    text = io.StringIO()
    writer = csv.writer(text)
    writer.writerow(head + (["y_m", "x_m"] if focal_length else []))
    rows, columns = np.nonzero((table.power > SMALLEST) | (table.target > 0))
    strongest = np.argsort(-table.power[rows, columns], kind="stable")
    for row, column in zip(rows[strongest], columns[strongest], strict=True):
        orders = int(table.m_y[row]), int(table.m_x[column])
        sines = [order * step for order, step in zip(orders, steps, strict=True)]
        if math.hypot(*sines) >= 1:
            continue
        line = [*orders, f"{table.power[row, column]:.8g}", f"{table.target[row, column]:.8g}"]
        line += [f"{sine:.10g}" for sine in sines]
        if focal_length:
            mapping = config.plane.mapping
            places = (sampling.focal_position(s, focal_length, mapping) for s in sines)
            line += [f"{place:.8g}" for place in places]
        writer.writerow(line)
    return text.getvalue().encode()
