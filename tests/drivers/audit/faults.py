"""Faults planted in the example routine in C: what to replace by what, and the checks that have to find it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Fault:
    """One planted fault: text replaced in routine.c, and the ids of checks of which at least one has to fail.

    `says` is what the sentence of a failing check has to contain.
    """

    name: str
    changes: tuple[tuple[str, str], ...]
    checks: tuple[str, ...]
    says: str = ""


STATIC = "struct increment { double time[2], temperature[2], strain[2][6]; };"
RETURN = "    return 0;\n}"
DXI = "const double dxi = (step->time[1] - step->time[0]) * exp(-fmin(ln_a[0], ln_a[1])) * gain_of(fabs(ln_a[1] - ln_a[0]));"
LN = "ln_a[k] = -log(10.0) * C1 * dT / (C2 + dT);"
SHEAR_H = "h_end[c] = decay * h[c] + 2.0 * gain * shear[2 * i] * deviator_step[c];"
TANGENT = "tangent[6 * a + b] = a < 3 && b < 3 ? K - 2.0 * G / 3.0 + (a == b ? 2.0 * G : 0.0) : (a == b ? G : 0.0);"
GAIN = "static double gain_of(double r) { return r > 0.0 ? -expm1(-r) / r : 1.0; }"
MECHANICAL = "- 3.0 * alpha * (step->temperature[1] - step->temperature[0]);"
SHEAR_R = "const double r = dxi / shear[2 * i + 1], decay = exp(-r), gain = gain_of(r);"

FAULTS = (
    Fault("log base: e for 10", ((LN, "ln_a[k] = -C1 * dT / (C2 + dT);"),), ("relaxation", "path"), "shift factor"),
    Fault("shift direction", ((LN, "ln_a[k] = log(10.0) * C1 * dT / (C2 + dT);"),), ("relaxation", "path")),
    Fault(
        "reference temperature in degC",
        (
            (
                "const double dT = step->temperature[k] - T_ref;",
                "const double dT = step->temperature[k] - 273.15 - T_ref + 273.15 + 5.0;",
            ),
        ),
        ("relaxation", "path"),
    ),
    Fault(
        "shear factor 2",
        (
            ("deviator[c] = c < 3 ? end[c] - mean : 0.5 * end[c];", "deviator[c] = c < 3 ? end[c] - mean : end[c];"),
            ("0.5 * (end[c] - start[c]);", "end[c] - start[c];"),
        ),
        ("relaxation", "isotropy", "tangent"),
        "engineering",
    ),
    Fault(
        "shear strain halved twice",
        (("0.5 * (end[c] - start[c]);", "0.25 * (end[c] - start[c]);"),),
        ("relaxation", "isotropy"),
    ),
    Fault(
        "tangent without branches", (("        G += gain * shear[2 * i];\n", ""),), ("tangent",), "too soft in shear"
    ),
    Fault(
        "tangent without bulk branches",
        (("        K += gain * bulk[2 * j];\n", ""),),
        ("tangent",),
        "too soft in volume",
    ),
    Fault(
        "tangent with 2 G in shear",
        ((TANGENT, TANGENT.replace("(a == b ? G : 0.0)", "(a == b ? 2.0 * G : 0.0)")),),
        ("tangent",),
    ),
    Fault(
        "tangent asymmetric",
        ((RETURN, "    tangent[1] *= 1.1;\n" + RETURN),),
        ("tangent-symmetry", "tangent"),
        "Entries (1, 2)",
    ),
    Fault(
        "tangent of the instant",
        (("        G += gain * shear[2 * i];\n", "        G += shear[2 * i];\n"),),
        ("tangent",),
        "too stiff",
    ),
    Fault(
        "hidden static memory",
        (
            (STATIC, STATIC + "\nstatic double hidden = 0.0;"),
            (RETURN, "    hidden += 1e-3; stress[0] *= 1.0 + 1e-6 * hidden;\n" + RETURN),
        ),
        ("repeatable", "restart", "two-points"),
        "between calls",
    ),
    Fault(
        "relaxing stress kept in a static array",
        (
            (STATIC, STATIC + "\nstatic double kept[600];"),
            ("const double *h = memory + 1 + n_bulk + 6 * i;", "const double *h = kept + 6 * i;"),
            ("h_end[c] = decay", "kept[6 * i + c] = h_end[c] = decay"),
        ),
        ("repeatable", "restart", "two-points"),
    ),
    Fault(
        "memory_end starts from what it held",
        (("memory_end[0] = memory[0] + mechanical;", "memory_end[0] += mechanical;"),),
        ("relaxation", "repeatable", "path", "restart"),
    ),
    Fault(
        "writes into its own start",
        ((RETURN, "    ((double *)memory)[0] += 1.0;\n" + RETURN),),
        ("relaxation", "repeatable", "restart"),
    ),
    Fault(
        "shift taken at the start, order 2 claimed",
        ((DXI, "const double dxi = (step->time[1] - step->time[0]) * exp(-ln_a[0]);"),),
        ("order",),
        "fall at order 1",
    ),
    Fault(
        "shift taken at the end, order 2 claimed",
        ((DXI, "const double dxi = (step->time[1] - step->time[0]) * exp(-ln_a[1]);"),),
        ("order",),
        "reduced time",
    ),
    Fault(
        "0/0 at a zero increment",
        ((GAIN, "static double gain_of(double r) { return -expm1(-r) / r; }"),),
        ("zero-increment",),
        "not",
    ),
    Fault(
        "overflow at 1e30 s",
        (
            (
                SHEAR_R,
                "const double r = dxi / shear[2 * i + 1], decay = exp(-r), gain = r > 0.0 ? (exp(r) - 1.0) / (r * exp(r)) : 1.0;",
            ),
        ),
        ("long-increment",),
    ),
    Fault("anisotropy", ((RETURN, "    stress[2] *= 1.02;\n" + RETURN),), ("isotropy",), "component"),
    Fault(
        "a shear component forgotten",
        ((RETURN, "    stress[4] = 0.0;\n" + RETURN),),
        ("isotropy",),
        "single components lack",
    ),
    Fault(
        "forward Euler",
        ((SHEAR_R, "const double r = dxi / shear[2 * i + 1], decay = 1.0 - r, gain = 1.0;"),),
        ("long-increment", "relaxation", "path"),
    ),
    Fault(
        "backward Euler, order 2 claimed",
        ((SHEAR_R, "const double r = dxi / shear[2 * i + 1], decay = 1.0 / (1.0 + r), gain = decay;"),),
        ("order", "relaxation"),
    ),
    Fault(
        "trapezoidal rule, which rings",
        (
            (
                SHEAR_R,
                "const double r = dxi / shear[2 * i + 1], decay = (1.0 - 0.5 * r) / (1.0 + 0.5 * r), gain = 1.0 / (1.0 + 0.5 * r);",
            ),
        ),
        ("long-increment",),
        "rings",
    ),
    Fault(
        "off-by-one branch",
        (("for (int i = 0; i < n_shear; i++) {", "for (int i = 1; i < n_shear; i++) {"),),
        ("relaxation",),
    ),
    Fault(
        "times of the neighbouring branch",
        (("dxi / shear[2 * i + 1]", "dxi / shear[2 * ((i + 1) % n_shear) + 1]"),),
        ("relaxation",),
        "relaxation times",
    ),
    Fault(
        "bulk and shear exchanged",
        (
            ("double K = constants[1], pressure;", "double K = constants[0], pressure;"),
            ("double G = constants[0];", "double G = constants[1];"),
        ),
        ("relaxation",),
        "instantaneous modulus",
    ),
    Fault(
        "thermal strain sign",
        ((MECHANICAL, MECHANICAL.replace("- 3.0", "+ 3.0")),),
        ("temperature-jump", "path"),
        "thermal strain",
    ),
    Fault(
        "thermal strain a third",
        ((MECHANICAL, MECHANICAL.replace("- 3.0 * alpha", "- alpha")),),
        ("temperature-jump", "path"),
    ),
    Fault(
        "fractions of the wrong limit",
        (("double G = constants[0];", "double G = 3.0 * constants[0];"),),
        ("relaxation",),
    ),
    Fault(
        "decay of the wrong sign",
        (("decay = exp(-r)", "decay = exp(-r) > 0.5 ? exp(-r) : -exp(-r)"),),
        ("long-increment",),
        "rises again",
    ),
    Fault(
        "crash on cooling",
        ((RETURN, "    if (step->temperature[1] < step->temperature[0] - 1.0) *(volatile int *)0 = 1;\n" + RETURN),),
        ("path",),
        "crash",
    ),
    Fault(
        "hang in long increments",
        ((RETURN, "    if (step->time[1] - step->time[0] > 1e18) for (volatile int k = 0;; k++);\n" + RETURN),),
        ("long-increment",),
        "hang",
    ),
    Fault(
        "write beyond memory",
        ((RETURN, "    memory_end[n_memory] = 1.0;\n" + RETURN),),
        ("relaxation",),
        "out-of-bounds",
    ),
    Fault("write beyond the stress", ((RETURN, "    stress[6] = 1.0;\n" + RETURN),), ("relaxation",), "out-of-bounds"),
    Fault(
        "returns a code in a jump",
        ((RETURN, "    if (step->time[1] == step->time[0]) return 7;\n" + RETURN),),
        ("zero-increment",),
        "7",
    ),
    Fault(
        "NaN on cooling",
        ((RETURN, "    if (step->temperature[1] < step->temperature[0] - 1.0) stress[3] = 0.0 / 0.0;\n" + RETURN),),
        ("path",),
        "not-finite",
    ),
    Fault(
        "tangent not set",
        (("            " + TANGENT, "            tangent[6 * a + b] = a == b ? K : 0.0;"),),
        ("tangent",),
    ),
)
