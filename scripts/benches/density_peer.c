/* The peer that a good engineer would write by hand: columns as lanes, one histogram a column.

   The lane loops carry "omp simd", so that they become vector code at every width and call libmvec's exp
   and sin; counting is scalar, since each lane has its own column. Escaped lanes fall outside by the
   unsigned comparison. */

#include <math.h>
#include <stdint.h>

#define NAMED(name, lanes) name##_##lanes

#define KERNEL(name, lanes, step)                                                                          \
    void NAMED(name, lanes)(double *state, const double *swept, uint32_t *counts, long columns, long rows,  \
                            long steps, double bottom, double scale)                                        \
    {                                                                                                       \
        for (long c = 0; c < columns; c += lanes) {                                                         \
            double x[lanes], r[lanes];                                                                      \
            int32_t cell[lanes];                                                                            \
            uint32_t *block = counts + c * rows;                                                            \
            for (int l = 0; l < lanes; l++) {                                                               \
                x[l] = state[c + l];                                                                        \
                r[l] = swept[c + l];                                                                        \
            }                                                                                               \
            for (long s = 0; s < steps; s++) {                                                              \
                _Pragma("omp simd simdlen(8)") for (int l = 0; l < lanes; l++)                              \
                {                                                                                           \
                    x[l] = step(x[l], r[l]);                                                                \
                    cell[l] = (int32_t)((x[l] - bottom) * scale);                                           \
                }                                                                                           \
                for (int l = 0; l < lanes; l++)                                                             \
                    if ((uint32_t)cell[l] < (uint32_t)rows)                                                 \
                        block[l * rows + cell[l]]++;                                                        \
            }                                                                                               \
            for (int l = 0; l < lanes; l++)                                                                 \
                state[c + l] = x[l];                                                                        \
        }                                                                                                   \
    }

#define LOGISTIC(x, r) ((r) * (x) * (1.0 - (x)))
#define RICKER(x, r) ((x) * exp((r) * (1.0 - (x))))
#define SINE(x, r) ((r) * sin(M_PI * (x)))

#define WIDTHS(name, step) KERNEL(name, 8, step) KERNEL(name, 16, step) KERNEL(name, 32, step)

WIDTHS(logistic, LOGISTIC)
WIDTHS(ricker, RICKER)
WIDTHS(sine, SINE)
