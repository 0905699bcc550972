"""Routines that go wrong on purpose, in C and in Python: a normal strain e33 >= 1 at the end of an increment says how."""

from __future__ import annotations

import os
import subprocess
from pathlib import Path

import numpy as np

from matlib.routine import Block

C = r"""
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <unistd.h>

struct increment { double time[2], temperature[2], strain[2][6]; };

int stress_update(const struct increment *step, int n_constants, const double *constants,
                  int n_memory, const double *memory, double *memory_end, double stress[6], double tangent[36])
{
    double *volatile stray;
    (void)n_constants;
    for (int i = 0; i < n_memory; i++) memory_end[i] = memory[i];
    memory_end[0] = memory[0] + 1.0;
    for (int i = 0; i < 6; i++) stress[i] = constants[0] * step->strain[1][i];
    for (int i = 0; i < 36; i++) tangent[i] = i % 7 == 0 ? constants[0] : 0.0;
    switch ((int)step->strain[1][2]) {
    case 1: stray = (double *)8; *stray = 1.0; break;
    case 2: abort();
    case 3: exit(7);
    case 4: for (;;) ;
    case 5: sleep(1000); break;
    case 6: return 17;
    case 7: stress[3] = NAN; break;
    case 8: tangent[35] = INFINITY; break;
    case 9: memory_end[1] = -INFINITY; break;
    case 10: stress[6] = 1.0; break;
    case 11: memory_end[n_memory] = 1.0; break;
    case 12: tangent[-1] = 1.0; break;
    case 13: ((double *)memory)[1] = 7.0; break;
    case 14: ((double *)constants)[1] = 7.0; break;
    case 15: ((struct increment *)step)->temperature[1] = 7.0; break;
    case 16: for (int i = 0; i < 20000; i++) stress[i] = 1.0; break;
    case 17: for (int d = 3; d < 64; d++) close(d); break;
    case 18: stray = malloc((size_t)1 << 34); stray[0] = 1.0; free(stray); break;
    case 19: if (system("sleep 1000 &")) return 1; break;
    case 20: printf("hello\n"); fflush(stdout); break;
    }
    return 0;
}

int no_tangent(const struct increment *step, int n_constants, const double *constants,
               int n_memory, const double *memory, double *memory_end, double stress[6], double tangent[36])
{
    (void)step; (void)n_constants; (void)constants; (void)memory; (void)tangent;
    for (int i = 0; i < n_memory; i++) memory_end[i] = 0.0;
    for (int i = 0; i < 6; i++) stress[i] = 0.0;
    return 0;
}

int times(const struct increment *step, int n_constants, const double *constants,
          int n_memory, const double *memory, double *memory_end, double stress[6], double tangent[36])
{
    (void)n_constants; (void)constants; (void)memory; (void)n_memory;
    memory_end[0] = step->time[0];
    memory_end[1] = step->time[1];
    for (int i = 0; i < 6; i++) stress[i] = step->strain[0][i] + 10.0 * step->strain[1][i];
    for (int i = 0; i < 36; i++) tangent[i] = i;
    return 0;
}
"""
"""Memory counts the calls."""

SEGFAULT, ABORT, EXIT, LOOP, SLEEP, STRAY, GONE = 1, 2, 3, 4, 5, 16, 17
TOO_LARGE, CHILD, PRINT = 18, 19, 20

KINDS = {
    SEGFAULT: "crash",
    ABORT: "crash",
    EXIT: "crash",
    LOOP: "hang",
    SLEEP: "hang",
    6: "code",
    7: "not-finite",
    8: "not-finite",
    9: "not-finite",
    10: "out-of-bounds",
    11: "out-of-bounds",
    12: "out-of-bounds",
    13: "input-changed",
    14: "input-changed",
    15: "input-changed",
}
"""What each strain must be reported as."""

PYTHON = """
import os, time
import numpy as np

class Faulty:
    def __init__(self, constants):
        self.modulus, self.memory_size = constants[0], 3

    def update(self, increment, memory):
        what = int(increment.strain[1][2])
        stress, tangent = self.modulus * increment.strain[1], self.modulus * np.eye(6)
        new = memory + [1.0, 0.0, 0.0]
        if what == 1:
            os.abort()
        if what == 3:
            os._exit(7)
        if what == 4:
            while True:
                pass
        if what == 5:
            time.sleep(1000.0)
        if what == 6:
            raise ValueError("no answer for\\nthis")
        if what == 7:
            stress[3] = np.nan
        if what == 8:
            tangent[5, 5] = np.inf
        if what == 9:
            new[1] = -np.inf
        if what == 10:
            stress = stress[:5]
        if what == 11:
            new = np.zeros(4)
        if what == 12:
            tangent = tangent.ravel()
        if what == 13:
            memory[1] = 7.0
        if what == 14:
            increment.strain[0][0] = 7.0
        if what == 15:
            return stress, tangent
        if what == 16:
            return None
        if what == 17:
            stress = "no numbers"
        if what == 18:
            raise SystemExit(0)
        return stress, tangent, new

made = Faulty([1e9])
not_a_routine = 3.0

class Grows(Faulty):
    @property
    def memory_size(self):
        return "three"
    @memory_size.setter
    def memory_size(self, value):
        pass
"""

PYTHON_KINDS = {
    1: "crash",
    3: "crash",
    4: "hang",
    5: "hang",
    6: "exception",
    7: "not-finite",
    8: "not-finite",
    9: "not-finite",
    10: "wrong-shape",
    11: "wrong-shape",
    12: "wrong-shape",
    13: "input-changed",
    14: "input-changed",
    15: "wrong-shape",
    16: "wrong-shape",
    17: "wrong-shape",
    18: "exception",
}


def build(source: Path, library: Path, *options: str) -> Path:
    """Compile C into a shared library."""
    command = ["gcc", "-O1", "-shared", "-fPIC", *options, "-o", str(library), str(source), "-lm"]
    subprocess.run(command, check=True, timeout=60)
    return library


def block(n: int, where: int | None = None, what: float = 0.0, *, mixed: bool = False) -> Block:
    """`n` increments of 1 s in which increment `where` carries e33 = `what`; with `mixed`, two shear stresses are kept at zero."""
    targets = np.zeros((n, 6))
    targets[:, 0] = np.linspace(0.0, 0.01, n + 1)[1:]
    if where is not None:
        targets[where, 2] = what
    return Block(
        time=np.arange(n) * 1.0,
        time_end=np.arange(n) + 1.0,
        duration=np.ones(n),
        temperature=np.full(n + 1, 300.0),
        targets=targets,
        stress_controlled=np.array([False] * 4 + [mixed] * 2),
    )


def workers() -> set[int]:
    """Process ids of all workers that this process has started, and of their own children; from /proc."""
    mine, found = str(os.getpid()), set()
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                fields = (entry / "stat").read_text().rpartition(")")[2].split()
                command = (entry / "cmdline").read_bytes()
            except OSError:
                continue
            if fields[1] == mine and b"drivers.foreign.worker" in command:
                found.add(int(entry.name))
    return found


def group(leader: int) -> set[int]:
    """Process ids in the group of a process; from /proc."""
    found = set()
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                fields = (entry / "stat").read_text().rpartition(")")[2].split()
            except OSError:
                continue
            if fields[2] == str(leader) and fields[0] != "Z":
                found.add(int(entry.name))
    return found
