/* A stress update of the whole material, as an example to start from. Build it with
 *
 *     gcc -O2 -shared -fPIC -o routine-c.so routine.c -lm
 *
 * Isotropic, linear viscoelastic, thermorheologically simple, with thermal expansion:
 *
 *     stress = int 2 G(xi - xi') d(dev e) + int K(xi - xi') (d(tr e) - 3 alpha dT) I
 *
 * Shift law: WLF. Shift rule: ln a_T linear over the increment (mean-log). Recursion: exact for strain linear in reduced time
 * (exponential): each relaxing stress goes from h to exp(-r) h + (1 - exp(-r))/r 2 G_i de, with r = dxi/tau_i. Second order.
 *
 * constants: G_inf, K_inf [Pa], n_shear, n_bulk, then n_shear pairs G_i [Pa], tau_i [s], then n_bulk pairs K_j [Pa], tau_j [s],
 *            then C1 (base 10), C2 [K], T_ref [K], alpha [1/K].
 * memory:    mechanical volume strain, n_bulk relaxing mean stresses, 6 relaxing deviatoric stresses for each shear term.
 *
 * Returns 0; 1 at or below the pole of the shift law; 2 where the constants or the memory have another length than they should.
 */

#include <math.h>

struct increment { double time[2], temperature[2], strain[2][6]; };

/* (1 - exp(-r))/r, which is 1 at r = 0; expm1 keeps it accurate for small r. */
static double gain_of(double r) { return r > 0.0 ? -expm1(-r) / r : 1.0; }

int stress_update(const struct increment *step, int n_constants, const double *constants,
                  int n_memory, const double *memory, double *memory_end, double stress[6], double tangent[36])
{
    if (n_constants < 8)
        return 2;
    const int n_shear = (int)constants[2], n_bulk = (int)constants[3];
    if (n_constants != 8 + 2 * (n_shear + n_bulk) || n_memory != 1 + n_bulk + 6 * n_shear)
        return 2;
    const double *shear = constants + 4, *bulk = shear + 2 * n_shear, *rest = bulk + 2 * n_bulk;
    const double C1 = rest[0], C2 = rest[1], T_ref = rest[2], alpha = rest[3];

    /* Reduced time: 1/a_T is exponential in time over the increment, its mean the logarithmic mean of the ends,
       taken from the larger rate downwards so that nothing overflows. */
    double ln_a[2];
    for (int k = 0; k < 2; k++) {
        const double dT = step->temperature[k] - T_ref;
        if (!(C2 + dT > 0.0))
            return 1;
        ln_a[k] = -log(10.0) * C1 * dT / (C2 + dT);
    }
    const double dxi = (step->time[1] - step->time[0]) * exp(-fmin(ln_a[0], ln_a[1])) * gain_of(fabs(ln_a[1] - ln_a[0]));

    /* Strains: the shear entries are engineering strains, twice the tensor's. */
    const double *start = step->strain[0], *end = step->strain[1];
    const double mean = (end[0] + end[1] + end[2]) / 3.0;
    const double mean_step = ((end[0] - start[0]) + (end[1] - start[1]) + (end[2] - start[2])) / 3.0;
    double deviator[6], deviator_step[6];
    for (int c = 0; c < 6; c++) {
        deviator[c] = c < 3 ? end[c] - mean : 0.5 * end[c];
        deviator_step[c] = c < 3 ? end[c] - start[c] - mean_step : 0.5 * (end[c] - start[c]);
    }

    /* Volume: what is left of the volume strain without thermal expansion. */
    const double mechanical = 3.0 * mean_step - 3.0 * alpha * (step->temperature[1] - step->temperature[0]);
    double K = constants[1], pressure;
    memory_end[0] = memory[0] + mechanical;
    pressure = K * memory_end[0];
    for (int j = 0; j < n_bulk; j++) {
        const double r = dxi / bulk[2 * j + 1], gain = gain_of(r);
        memory_end[1 + j] = exp(-r) * memory[1 + j] + gain * bulk[2 * j] * mechanical;
        pressure += memory_end[1 + j];
        K += gain * bulk[2 * j];
    }

    /* Shape. */
    double G = constants[0];
    for (int c = 0; c < 6; c++)
        stress[c] = 2.0 * G * deviator[c] + (c < 3 ? pressure : 0.0);
    for (int i = 0; i < n_shear; i++) {
        const double r = dxi / shear[2 * i + 1], decay = exp(-r), gain = gain_of(r);
        const double *h = memory + 1 + n_bulk + 6 * i;
        double *h_end = memory_end + 1 + n_bulk + 6 * i;
        for (int c = 0; c < 6; c++) {
            h_end[c] = decay * h[c] + 2.0 * gain * shear[2 * i] * deviator_step[c];
            stress[c] += h_end[c];
        }
        G += gain * shear[2 * i];
    }

    /* d(stress)/d(strain at the end), row by row; against engineering shear strain it is G, not 2 G. */
    for (int a = 0; a < 6; a++)
        for (int b = 0; b < 6; b++)
            tangent[6 * a + b] = a < 3 && b < 3 ? K - 2.0 * G / 3.0 + (a == b ? 2.0 * G : 0.0) : (a == b ? G : 0.0);
    return 0;
}
