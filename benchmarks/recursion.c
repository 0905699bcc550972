/* The exponential recursion in C, for comparison: the same increments, the same six components, the same output.

   Strains are given; shear relaxes, the bulk modulus is elastic. Term index innermost, one row of relaxing stresses a
   component, everything contiguous and restrict. Three ways to get the decay exp(-r) and the gain (1 - exp(-r))/r:

   run_formulas   both as they are written, each to full relative accuracy, as the package has them
   run_shared     expm1 once, decay = 1 + expm1(-r): half the work; the decay is right to 1e-16 of 1, not of itself
   run_plain      exp once, gain = (1 - exp(-r))/r: loses digits of the gain as r falls, all of them below 1e-16 */
#include <math.h>
#include <stddef.h>

#define LARGEST 64

static inline void formulas(size_t m, double dxi, const double *restrict rate, const double *restrict modulus,
                            double *restrict decay, double *restrict gain)
{
    for (size_t i = 0; i < m; i++) {
        double r = dxi * rate[i];
        decay[i] = exp(-r);
        gain[i] = modulus[i] * (r > 0.0 ? -expm1(-r) / r : 1.0);
    }
}

static inline void shared(size_t m, double dxi, const double *restrict rate, const double *restrict modulus,
                          double *restrict decay, double *restrict gain)
{
    for (size_t i = 0; i < m; i++) {
        double r = dxi * rate[i];
        double less = expm1(-r);
        decay[i] = 1.0 + less;
        gain[i] = modulus[i] * (r > 0.0 ? -less / r : 1.0);
    }
}

static inline void plain(size_t m, double dxi, const double *restrict rate, const double *restrict modulus,
                         double *restrict decay, double *restrict gain)
{
    for (size_t i = 0; i < m; i++) {
        double r = dxi * rate[i];
        decay[i] = exp(-r);
        gain[i] = modulus[i] * (r > 0.0 ? (1.0 - decay[i]) / r : 1.0);
    }
}

/* n increments, m terms (at most LARGEST); modulus is 2 G_i; h has 6 rows of m and holds zeros or an earlier state;
   thermal are the increments of the thermal volume strain; strain and stress have n rows of 6, Mandel form. */
#define RUN(NAME, WEIGHTS)                                                                                             \
    void NAME(size_t n, size_t m, const double *restrict dxi, const double *restrict strain,                           \
              const double *restrict thermal, const double *restrict rate, const double *restrict modulus,             \
              double twice_G, double K, double *restrict h, double *restrict stress)                                   \
    {                                                                                                                  \
        double decay[LARGEST], gain[LARGEST], before[6] = {0}, theta = 0.0;                                            \
        for (size_t k = 0; k < n; k++) {                                                                               \
            const double *restrict e = strain + 6 * k;                                                                 \
            double volume = (e[0] - before[0]) + (e[1] - before[1]) + (e[2] - before[2]);                              \
            double mean = (e[0] + e[1] + e[2]) / 3.0;                                                                  \
            theta += volume - thermal[k];                                                                              \
            WEIGHTS(m, dxi[k], rate, modulus, decay, gain);                                                            \
            for (size_t c = 0; c < 6; c++) {                                                                           \
                double *restrict row = h + c * m;                                                                      \
                double step = e[c] - before[c] - (c < 3 ? volume / 3.0 : 0.0), sum = 0.0;                              \
                for (size_t i = 0; i < m; i++) {                                                                       \
                    row[i] = decay[i] * row[i] + gain[i] * step;                                                       \
                    sum += row[i];                                                                                     \
                }                                                                                                      \
                stress[6 * k + c] = sum + twice_G * (c < 3 ? e[c] - mean : e[c]) + (c < 3 ? K * theta : 0.0);          \
                before[c] = e[c];                                                                                      \
            }                                                                                                          \
        }                                                                                                              \
    }

RUN(run_formulas, formulas)
RUN(run_shared, shared)
RUN(run_plain, plain)
