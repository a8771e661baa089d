"""Steps with a mobility that falls to a small floor in both phases, against a constant one: at equal error the default stepper needs
no more than three times as many. Both unmix the same noise to the same time; the error is that of the field against a run of a
tenth of the accuracy number. Counts of steps, rejected ones included, not times."""
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
m:record{ m:energy(), every = 300 }
m:save{ c, every = 300 }
m:picture{ c, every = 300 }
m:run{ duration = 600, accuracy = accuracy }
"""


def measured(floor, accuracy):
    r = Run(SCRIPT, f"floor={floor}", f"accuracy={accuracy}")
    with open(os.path.join(r.out, "summary.json")) as f:
        state = json.load(f)["state"]
    return int(state["steps"] + state["rejected"]), r.array("c-0002.npy")


def error(a, b):
    return np.linalg.norm(a - b) / np.linalg.norm(b - b.mean())


fine = measured(1, 0.001)[1]
steps, c = measured(1, 0.01)
allowed = error(c, fine)
print(f"constant mobility: {steps} steps, field off by {allowed:.2e}")
for floor in (1e-2, 1e-3):
    fine = measured(floor, 0.001)[1]
    for accuracy in (0.01, 0.005, 0.0025):  # the coarsest that errs no more
        taken, c = measured(floor, accuracy)
        off = error(c, fine)
        print(f"floor {floor}: accuracy {accuracy}: {taken} steps ({taken / steps:.2f} times), field off by {off:.2e}")
        if off <= allowed:
            break
    assert off <= allowed, "as small an error was not reached"
    assert taken <= 3 * steps, "more than three times the steps"
print("steps hold")
