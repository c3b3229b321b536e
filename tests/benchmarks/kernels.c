/* The fewest-instruction C formulation found for each kernel.
 * Where the best one depends on the core, the choice is made with the compiler's own macros. */
#include "kernels.h"
#pragma STDC FP_CONTRACT OFF

#define F(c) ((float)(c))
#define HIDE(p) __asm__("" : "+r"(p))           /* the table stays a table: loads instead of movw/movt */
#define COLD __asm__ volatile("")               /* keeps the saturating path a branch */
#if defined(__ARM_PCS_VFP) && !defined(__ARM_FPV5__)
#define PIN(v) __asm__("" : "+t"(v))            /* Cortex-M4F: products of x first, so y can live in s0 */
#else
#define PIN(v) (void)(v)
#endif
#define MAC(acc, c, x) ((acc) + (c) * (x))
#if defined(__ARM_FEATURE_FMA)
/* not fmaf (a library call unless -fno-math-errno); not FP_CONTRACT ON (not fused on Cortex-M4) */
#define FMA(acc, c, x) __builtin_elementwise_fma((c), (x), (acc))
#endif

/* ------------------------------------------------------------------ float: sections */

#define TDF2(name, M) \
    float name(float32_transposed_two_state *s, float x) { \
        float y = M(s->s1, F(S1_B0), x); \
        float p = M(s->s2, F(S1_B1), x), q = F(S1_B2) * x; \
        s->s1 = M(p, F(S1_NA1), y); \
        s->s2 = M(q, F(S1_NA2), y); \
        return y; }
#define TDF2_PIN(name, M) \
    float name(float32_transposed_two_state *s, float x) { \
        float p = M(s->s2, F(S1_B1), x), q = F(S1_B2) * x; \
        PIN(p); PIN(q); \
        float y = M(s->s1, F(S1_B0), x); \
        s->s1 = M(p, F(S1_NA1), y); \
        s->s2 = M(q, F(S1_NA2), y); \
        return y; }
#define CASCADE2(name, M) \
    float name(float32_two_sections_state *s, float x) { \
        float y = M(s->s1, F(S1_B0), x); \
        s->s1 = M(M(s->s2, F(S1_B1), x), F(S1_NA1), y); \
        s->s2 = M(F(S1_B2) * x, F(S1_NA2), y); \
        float p = M(s->t2, F(S2_B1), y), q = F(S2_B2) * y; \
        PIN(p); PIN(q); \
        float z = M(s->t1, F(S2_B0), y); \
        s->t1 = M(p, F(S2_NA1), z); \
        s->t2 = M(q, F(S2_NA2), z); \
        return z; }
#define CASCADE2_FMA(name, M) \
    float name(float32_two_sections_state *s, float x) { \
        float y = M(s->s1, F(S1_B0), x); \
        s->s1 = M(M(s->s2, F(S1_B1), x), F(S1_NA1), y); \
        s->s2 = M(F(S1_B2) * x, F(S1_NA2), y); \
        float z = M(s->t1, F(S2_B0), y); \
        s->t1 = M(M(s->t2, F(S2_B1), y), F(S2_NA1), z); \
        s->t2 = M(F(S2_B2) * y, F(S2_NA2), z); \
        return z; }
#define DF1(name, M) \
    float name(float32_direct_one_state *s, float x) { \
        float x1 = s->x1, x2 = s->x2, y1 = s->y1, y2 = s->y2; \
        float y = M(M(M(M(F(S1_B0) * x, F(S1_B1), x1), F(S1_B2), x2), F(S1_NA1), y1), F(S1_NA2), y2); \
        s->x1 = x; s->x2 = x1; s->y1 = y; s->y2 = y1; \
        return y; }

/* ------------------------------------------------------------------ float: controllers */

#if !defined(__ARM_PCS_VFP)
/* Without an FPU: compare bit patterns.  Right because LO < 0 < HI; -0.0 passes through, NaN is clamped. */
static inline float clamp(float u)
{
    union { float f; int32_t i; } v, h, l;
    v.f = u; h.f = F(PID_HI); l.f = F(PID_LO);
    if (v.i > h.i) v.i = h.i;
    if ((uint32_t)v.i > (uint32_t)l.i) v.i = l.i;
    return v.f;
}
#elif defined(__ARM_FPV5__)
static inline float clamp(float u)              /* vminnm, vmaxnm */
{
    return __builtin_fmaxf(__builtin_fminf(u, F(PID_HI)), F(PID_LO));
}
#else
static inline float clamp(float u)
{
    if (u > F(PID_HI)) u = F(PID_HI);
    else if (u < F(PID_LO)) u = F(PID_LO);
    return u;
}
#endif
#define PI(name, M) \
    float name(float32_pi_state *s, float e) { \
        float u = clamp(M(M(s->u1, F(PI_B0), e), F(PI_B1), s->e1)); \
        s->e1 = e; s->u1 = u; \
        return u; }
#define PID(name, M) \
    float name(float32_pid_state *s, float e) { \
        float e1 = s->e1, e2 = s->e2, u1 = s->u1, u2 = s->u2; \
        float u = clamp(M(M(M(M(F(PID_B0) * e, F(PID_B1), e1), F(PID_B2), e2), F(PID_NA1), u1), F(PID_NA2), u2)); \
        s->e1 = e; s->e2 = e1; s->u1 = u; s->u2 = u1; \
        return u; }

#if defined(__ARM_PCS_VFP) && !defined(__ARM_FPV5__)
TDF2_PIN(float32_transposed_two_update, MAC)
#else
TDF2(float32_transposed_two_update, MAC)
#endif
CASCADE2(float32_two_sections_update, MAC)
DF1(float32_direct_one_update, MAC)
PI(float32_pi_update, MAC)
PID(float32_pid_update, MAC)
#if defined(FMA)
TDF2(float32_transposed_two_fused_update, FMA)
CASCADE2_FMA(float32_two_sections_fused_update, FMA)
DF1(float32_direct_one_fused_update, FMA)
PI(float32_pi_fused_update, FMA)
PID(float32_pid_fused_update, FMA)
#endif

/* ------------------------------------------------------------------ int32, coefficients Q2.30 */

typedef int64_t i64;
#define HALF ((i64)1 << 29)
#define ABS_(c) ((c) < 0 ? -(i64)(c) : (i64)(c))
#define FITS64(name, b0, b1, b2, a1, a2) \
    typedef char name[ABS_(b0) + ABS_(b1) + ABS_(b2) + ABS_(a1) + ABS_(a2) < ((i64)1 << 32) ? 1 : -1] \
        __attribute__((unused))
enum { A0 = TO_30_BITS(S1_B0), A1 = TO_30_BITS(S1_B1), A2 = TO_30_BITS(S1_B2), A3 = TO_30_BITS(S1_NA1), A4 = TO_30_BITS(S1_NA2),
       D0 = TO_30_BITS(S2_B0), D1 = TO_30_BITS(S2_B1), D2 = TO_30_BITS(S2_B2), D3 = TO_30_BITS(S2_NA1), D4 = TO_30_BITS(S2_NA2) };
FITS64(section_1_coefficients_sum_below_4, A0, A1, A2, A3, A4);
FITS64(section_2_coefficients_sum_below_4, D0, D1, D2, D3, D4);

/* acc >> 30, saturated.  hi differs from y >> 2 exactly when the result does not fit. */
static inline int32_t sat30(i64 acc)
{
    int32_t hi = (int32_t)(acc >> 32), y = (int32_t)(((uint32_t)hi << 2) | ((uint32_t)acc >> 30));
    if (__builtin_expect(hi != y >> 2, 0)) { COLD; y = (hi >> 31) ^ INT32_MAX; }
    return y;
}

#if !INT32_OFFSET_HISTORY

static const int32_t KA[5] = {A0, A1, A2, A3, A4}, KAD[10] = {A0, A1, A2, A3, A4, D0, D1, D2, D3, D4};
#define SUM5(k, x, x1, x2, y1, y2) \
    ((i64)(x) * (k)[0] + (i64)(x1) * (k)[1] + (i64)(x2) * (k)[2] + (i64)(y1) * (k)[3] + (i64)(y2) * (k)[4])

int32_t int32_direct_one_update(int32_direct_one_state *s, int32_t x)
{
    const int32_t *k = KA;
    HIDE(k);
#if defined(__ARM_FPV5__)                        /* all loads first */
    int32_t x1 = s->x1, x2 = s->x2, y1 = s->y1, y2 = s->y2;
    int32_t y = sat30(HALF + SUM5(k, x, x1, x2, y1, y2));
    s->x1 = x; s->x2 = x1; s->y1 = y; s->y2 = y1;
#else                                            /* one half after the other: fewer registers */
    i64 a = HALF + (i64)s->x2 * k[2];
    int32_t x1 = s->x1;
    s->x1 = x; s->x2 = x1;
    a += (i64)x1 * k[1]; a += (i64)x * k[0]; a += (i64)s->y2 * k[4];
    int32_t y1 = s->y1;
    a += (i64)y1 * k[3];
    int32_t y = sat30(a);
    s->y1 = y; s->y2 = y1;
#endif
    return y;
}

int32_t int32_error_feedback_update(int32_error_feedback_state *s, int32_t x)
{
    const int32_t *k = KA;
    HIDE(k);
#if defined(__riscv)
    i64 a = (i64)s->err + (i64)s->x2 * k[2];
    int32_t x1 = s->x1;
    s->x1 = x; s->x2 = x1;
    a += (i64)x1 * k[1]; a += (i64)x * k[0]; a += (i64)s->y2 * k[4];
    int32_t y1 = s->y1;
    a += (i64)y1 * k[3];
#else
    int32_t x1 = s->x1, x2 = s->x2, y1 = s->y1, y2 = s->y2;
    i64 a = (i64)s->err + SUM5(k, x, x1, x2, y1, y2);
    s->x1 = x; s->x2 = x1;
#endif
    s->err = (int32_t)((uint32_t)a & 0x3fffffffu);
    int32_t y = sat30(a);
    s->y1 = y; s->y2 = y1;
    return y;
}

int32_t int32_two_sections_update(int32_two_sections_state *s, int32_t x)
{
    const int32_t *k = KAD;
    HIDE(k);
    int32_t x1 = s->x1, m1 = s->m1, m2 = s->m2;
    int32_t m = sat30(HALF + SUM5(k, x, x1, s->x2, m1, m2));
    s->x1 = x; s->x2 = x1;
    int32_t y1 = s->y1;
    int32_t y = sat30(HALF + SUM5(k + 5, m, m1, m2, y1, s->y2));
    s->m1 = m; s->m2 = m1; s->y1 = y; s->y2 = y1;
    return y;
}

#else
/* No 32x32->64 multiply (Cortex-M0).  Values are kept as u = v + 2^31 (unsigned) and coefficients as
 * sign and magnitude, both cut in 16-bit halves:
 *     sum c v = sum c u - 2^31 sum c         (the last part is a constant)
 *     c u     = cl ul + 2^16 (ch ul + cl uh) + 2^32 ch uh       four 32-bit products, all >= 0
 * Columns: L = sum cl ul (carries into 64 bits), M = the middle, H = sum ch uh (modulo 2^32 is enough).
 * sum |c| < 4 makes sum ch ul < 2^32: no carry there.  Two products whose constants add up to at most
 * 2^16 are added in 32 bits, too.  First pass: the low halves; second pass: the high halves. */
#define BIAS 0x80000000u
#define MAG(c) ((uint32_t)ABS_(c))
#define KL(c) (MAG(c) & 0xffffu)
#define KH(c) (MAG(c) >> 16)
#define NEG(c) ((c) < 0)
#define NOW(v) __asm__ volatile("" : "+l"(v))      /* computed here and not later: short live ranges */
#define RELOAD __asm__ volatile("" ::: "memory")
#define PAIRS(c, d) (NEG(c) == NEG(d) && KL(c) + KL(d) <= 65536)
#define ADD64(acc, c, t) do { if (NEG(c)) (acc) -= (uint32_t)(t); else (acc) += (uint32_t)(t); } while (0)
#define ADDPN(c, t) do { if (NEG(c)) { N += (t); NOW(N); } else { P += (t); NOW(P); } } while (0)
#define ADDH(c, t) do { if (NEG(c)) H -= (t); else H += (t); NOW(H); } while (0)
#define LOW2(u, c, w, d) do { \
        uint32_t v_ = (u), t_ = v_ * KL(c); ADDPN(c, v_ * KH(c)); \
        v_ = (w); \
        if (PAIRS(c, d)) { t_ += v_ * KL(d); ADD64(L, c, t_); } \
        else { ADD64(L, c, t_); ADD64(L, d, v_ * KL(d)); } \
        ADDPN(d, v_ * KH(d)); } while (0)
#define LOW1(u, c) do { uint32_t v_ = (u); ADD64(L, c, v_ * KL(c)); ADDPN(c, v_ * KH(c)); } while (0)
#define HIGH2(u, c, w, d) do { \
        uint32_t v_ = (u), t_ = v_ * KL(c); ADDH(c, v_ * KH(c)); \
        v_ = (w); \
        if (PAIRS(c, d)) { t_ += v_ * KL(d); ADD64(M, c, t_); } \
        else { ADD64(M, c, t_); ADD64(M, d, v_ * KL(d)); } \
        ADDH(d, v_ * KH(d)); } while (0)
#define HIGH1(u, c) do { uint32_t v_ = (u); ADD64(M, c, v_ * KL(c)); ADDH(c, v_ * KH(c)); } while (0)
#define LO(u) ((uint32_t)(u) & 0xffffu)
#define HI(u) ((uint32_t)(u) >> 16)
#define OFFSET(c0, c1, c2, c3, c4) (-((i64)(c0) + (c1) + (c2) + (c3) + (c4)) * 2147483648LL)
/* low: the low word of K, plus what else is to be added at the bottom (together below 2^32).
 * (a, b) and (c, d) are added in pairs where signs and sizes allow; the result is in `acc` */
#define COLUMNS(K, low, a, ka, b, kb, c, kc, d, kd, e, ke) \
    uint64_t L = (low), M; uint32_t P = 0, N = 0, H = 0; \
    LOW2(LO(a), ka, LO(b), kb); LOW1(LO(e), ke); LOW2(LO(c), kc, LO(d), kd); \
    RELOAD; \
    M = (uint64_t)((i64)L >> 16) + P; M -= N; \
    HIGH2(HI(a), ka, HI(b), kb); HIGH1(HI(e), ke); HIGH2(HI(c), kc, HI(d), kd); \
    H += (uint32_t)((uint64_t)(K) >> 32) + (uint32_t)(M >> 16); \
    i64 acc = (i64)(((uint64_t)H << 32) | ((uint32_t)M << 16))

#define KA_ (HALF + OFFSET(A0, A1, A2, A3, A4))
#define KE_ OFFSET(A0, A1, A2, A3, A4)           /* low word 0 or 2^31; the remainder is below 2^30 */
#define LOW(K) ((uint32_t)(uint64_t)(K))
#define KD_ (HALF + OFFSET(D0, D1, D2, D3, D4))

int32_t int32_direct_one_update(int32_direct_one_state *s, int32_t x)
{
    x = (int32_t)((uint32_t)x ^ BIAS);
    COLUMNS(KA_, LOW(KA_), x, A0, s->x2, A2, s->x1, A1, s->y2, A4, s->y1, A3);
    int32_t y = sat30(acc), t = s->x1;
    s->x1 = x; s->x2 = t;
    t = s->y1; s->y1 = (int32_t)((uint32_t)y ^ BIAS); s->y2 = t;
    return y;
}

int32_t int32_error_feedback_update(int32_error_feedback_state *s, int32_t x)
{
    x = (int32_t)((uint32_t)x ^ BIAS);
    COLUMNS(KE_, LOW(KE_) + (uint32_t)s->err, x, A0, s->x2, A2, s->x1, A1, s->y2, A4, s->y1, A3);
    s->err = (int32_t)(((uint32_t)acc & 0x3fffffffu) | ((uint32_t)L & 0xffffu));
    int32_t y = sat30(acc), t = s->x1;
    s->x1 = x; s->x2 = t;
    t = s->y1; s->y1 = (int32_t)((uint32_t)y ^ BIAS); s->y2 = t;
    return y;
}

static inline int32_t first(int32_two_sections_state *s, int32_t x)
{
    COLUMNS(KA_, LOW(KA_), x, A0, s->x2, A2, s->x1, A1, s->m2, A4, s->m1, A3);
    int32_t t = s->x1;
    s->x1 = x; s->x2 = t;
    return sat30(acc);
}

static inline int32_t second(int32_two_sections_state *s, int32_t m)
{
    COLUMNS(KD_, LOW(KD_), m, D0, s->m1, D1, s->m2, D2, s->y2, D4, s->y1, D3);
    int32_t t = s->m1;
    s->m1 = m; s->m2 = t;
    int32_t y = sat30(acc);
    t = s->y1; s->y1 = (int32_t)((uint32_t)y ^ BIAS); s->y2 = t;
    return y;
}

int32_t int32_two_sections_update(int32_two_sections_state *s, int32_t x)
{
    int32_t m = first(s, (int32_t)((uint32_t)x ^ BIAS));
    return second(s, (int32_t)((uint32_t)m ^ BIAS));
}
#endif

/* ------------------------------------------------------------------ int16, coefficients with 14 fraction bits */

enum { E0 = TO_14_BITS(S1_B0), E1 = TO_14_BITS(S1_B1), E2 = TO_14_BITS(S1_B2), E3 = TO_14_BITS(S1_NA1), E4 = TO_14_BITS(S1_NA2) };
/* inputs and history are int16, so the sum fits 32 bits if the coefficients' magnitudes add up to < 4 */
typedef char int16_fits_32_[(ABS_(E0) + ABS_(E1) + ABS_(E2) + ABS_(E3) + ABS_(E4)) * 32768 + 8192 <= INT32_MAX ? 1 : -1]
    __attribute__((unused));

static inline int32_t sat16(int32_t a)
{
#if defined(__ARM_FEATURE_SAT)                   /* becomes ssat with the shift folded in */
    if (a > 32767) a = 32767;
    if (a < -32768) a = -32768;
#else
    if (__builtin_expect(a != (int16_t)a, 0)) { COLD; a = (a >> 31) ^ 32767; }
#endif
    return a;
}

int16_t int16_direct_one_update(int16_direct_one_state *s, int16_t x)
{
    int32_t x1 = s->x1, y1 = s->y1;
    int32_t a = E0 * x + E1 * x1 + E2 * s->x2 + E3 * y1 + E4 * s->y2 + 8192;
    int32_t y = sat16(a >> 14);
    s->x1 = x; s->x2 = x1; s->y1 = y; s->y2 = y1;
    return (int16_t)y;
}

#if defined(__ARM_FEATURE_SIMD32)
#define PAIR(lo, hi) ((int32_t)(((uint32_t)(hi) << 16) | ((uint32_t)(lo) & 0xffffu)))
static const int32_t KP[2] = {PAIR(E1, E2), PAIR(E3, E4)};
#endif

int16_t int16_packed_update(int16_packed_state *s, int16_t x)
{
#if defined(__ARM_FEATURE_SIMD32)                /* two 16x16 products per instruction */
    const int32_t *k = KP;
    HIDE(k);
    uint32_t xx = s->xx, yy = s->yy;
    int32_t a = E0 * x + 8192;
    a = __builtin_arm_smlad((int32_t)xx, k[0], a);
    a = __builtin_arm_smlad((int32_t)yy, k[1], a);
#else
    uint32_t xx = s->xx, yy = s->yy;
    int32_t a = E0 * x + E1 * (int16_t)xx + E2 * ((int32_t)xx >> 16) + E3 * (int16_t)yy + E4 * ((int32_t)yy >> 16) + 8192;
#endif
    int32_t y = sat16(a >> 14);
    s->xx = (xx << 16) | (uint16_t)x; s->yy = (yy << 16) | (uint16_t)y;
    return (int16_t)y;
}

/* ------------------------------------------------------------------ history at rest */

void float32_transposed_two_clear(float32_transposed_two_state *s) { s->s1 = s->s2 = 0; }
void float32_two_sections_clear(float32_two_sections_state *s) { s->s1 = s->s2 = s->t1 = s->t2 = 0; }
void float32_direct_one_clear(float32_direct_one_state *s) { s->x1 = s->x2 = s->y1 = s->y2 = 0; }
void float32_pi_clear(float32_pi_state *s) { s->e1 = s->u1 = 0; }
void float32_pid_clear(float32_pid_state *s) { s->e1 = s->e2 = s->u1 = s->u2 = 0; }
#if INT32_OFFSET_HISTORY
#define REST INT32_MIN
#else
#define REST 0
#endif
void int32_direct_one_clear(int32_direct_one_state *s) { s->x1 = s->x2 = s->y1 = s->y2 = REST; }
void int32_error_feedback_clear(int32_error_feedback_state *s) { s->x1 = s->x2 = s->y1 = s->y2 = REST; s->err = 0; }
void int32_two_sections_clear(int32_two_sections_state *s) { s->x1 = s->x2 = s->m1 = s->m2 = s->y1 = s->y2 = REST; }
void int16_direct_one_clear(int16_direct_one_state *s) { s->x1 = s->x2 = s->y1 = s->y2 = 0; }
void int16_packed_clear(int16_packed_state *s) { s->xx = s->yy = 0; }
