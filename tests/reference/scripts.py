"""Helpers of the checks that drive mottle: run a script text, read its ledger and arrays. Not a test itself."""
import csv
import os
import subprocess
import sys
import tempfile

import numpy as np

mottle = os.environ["MOTTLE"]


class Run:
    """A finished run of a script text in a folder of its own."""

    def __init__(self, text, *arguments, files=(), threads=2, expect=0):
        self.folder = tempfile.mkdtemp(prefix="mottle-")
        path = os.path.join(self.folder, "script.lua")
        with open(path, "w") as f:
            f.write(text)
        for name, values in files:
            np.save(os.path.join(self.folder, name), values)
        self.out = os.path.join(self.folder, "run")
        done = subprocess.run([mottle, "run", path, *arguments, "--into", self.out, "--threads", str(threads), "--quiet"],
                              capture_output=True, text=True)
        self.code, self.stdout, self.stderr = done.returncode, done.stdout, done.stderr
        if expect is not None and self.code != expect:
            sys.exit(f"exit code {self.code}, expected {expect}: {self.stderr}")

    def ledger(self):
        """Columns by name (without the unit) as arrays; text columns as lists; empty cells as nan."""
        with open(os.path.join(self.out, "ledger.csv"), newline="") as f:
            head, *rows = list(csv.reader(f))
        columns = {}
        for i, name in enumerate(head):
            cells = [r[i] for r in rows]
            name = name.split(" [")[0]
            try:
                columns[name] = np.array([float(c) if c else np.nan for c in cells])
            except ValueError:
                columns[name] = cells
        return columns

    def array(self, name):
        return np.load(os.path.join(self.out, "fields", name))


def close(name, got, wanted, rtol=0.0, atol=0.0):
    """Prints what was measured; ends the check where it is too far off."""
    off = abs(got - wanted)
    print(f"{name}: {got:.10g}, expected {wanted:.10g} (off by {off:.3g}, allowed {rtol * abs(wanted) + atol:.3g})")
    if not off <= rtol * abs(wanted) + atol:
        sys.exit(f"FAILED: {name}")
