"""Steps with a mobility that falls to a small floor in both phases, against a constant one: at equal error the default stepper needs
no more than three times as many. Both unmix the same noise to the same time; the error is that of the field against a run of a
much smaller accuracy number and below 5 %. Counts of steps, rejected ones included, not times."""
import json
import os

import numpy as np

from scripts import Run

SCRIPT = """
local floor, accuracy = input("floor", 1), input("accuracy", 0.01)
local g = grid{ cells = {96, 96}, spacing = 1 }
local c = g:field("c", 0.5 + 0.05*noise.uniform{ seed = 7 })
local m = model{ energy = c^2*(1 - c)^2 + gradsq(c) }
local M = floor
if floor < 1 then M = floor + (1 - floor)*16*c^2*(1 - c)^2 end   -- 1 at c = 1/2, `floor` in both phases
m:conserve(c, { mobility = M })
m:record{ m:energy(), every = 100 }
m:save{ c, every = 100 }
m:picture{ c, every = 100 }
m:run{ duration = 200, accuracy = accuracy }
"""


def measured(floor, accuracy):
    r = Run(SCRIPT, f"floor={floor}", f"accuracy={accuracy}")
    with open(os.path.join(r.out, "summary.json")) as f:
        state = json.load(f)["state"]
    return int(state["steps"] + state["rejected"]), r.array("c-0002.npy")


def error(a, b):
    return np.linalg.norm(a - b) / np.linalg.norm(b - b.mean())


ALLOWED = 0.05  # of the field's norm: domains keep their order


def cheapest(floor):
    """Steps and error of the coarsest accuracy that errs no more than is allowed."""
    fine = measured(floor, 0.0001)[1]
    for accuracy in (0.01, 0.005, 0.0025, 0.00125, 0.0006):
        taken, c = measured(floor, accuracy)
        off = error(c, fine)
        print(f"{'constant mobility' if floor == 1 else f'floor {floor}'}: accuracy {accuracy}: {taken} steps, field off by {off:.2e}")
        if off <= ALLOWED:
            return taken
    raise AssertionError(f"floor {floor}: the error of {ALLOWED} was not reached")


steps = cheapest(1)
for floor in (1e-2, 1e-3):
    taken = cheapest(floor)
    print(f"floor {floor}: {taken / steps:.2f} times the steps")
    assert taken <= 3 * steps, "more than three times the steps"
print("steps hold")
