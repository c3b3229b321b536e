/* Counts which branches of instrumented code were taken; linked beside it, itself not instrumented. */
#include <stdint.h>

enum { MOST = 1 << 16 };

static unsigned char taken[MOST];
static const uintptr_t *places;
static uint32_t count;

void __sanitizer_cov_trace_pc_guard_init(uint32_t *start, uint32_t *stop)
{
    for (uint32_t *guard = start; guard < stop; guard++) {
        *guard = (uint32_t)(guard - start) + 1;
    }
    count = (uint32_t)(stop - start);
}

void __sanitizer_cov_pcs_init(const uintptr_t *start, const uintptr_t *stop)
{
    (void)stop;
    places = start;
}

void __sanitizer_cov_trace_pc_guard(uint32_t *guard)
{
    if (*guard < MOST) {
        taken[*guard] = 1;
    }
}

/* How many branches of a function there are, or were never taken; -1 when it is not there. */
int branches(uintptr_t function, int missed_only)
{
    int found = -1;
    for (uint32_t k = 0; k < count; k++) {
        if (places[2 * k + 1] & 1) {
            if (found >= 0) {
                return found;
            }
            found = places[2 * k] == function ? 0 : -1;
        }
        if (found >= 0 && !(missed_only && taken[k + 1])) {
            found++;
        }
    }
    return found;
}
