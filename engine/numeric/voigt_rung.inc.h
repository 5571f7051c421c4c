/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Body of one rung of the Voigt kernel. The includer sets LW_LANES (points done at once) and
 * LW_RUNG_SUM (name of the function). No include guard: each rung is one translation unit.
 *
 * With v = 2 sigma^2, Z = x + i gamma (gamma = half the Lorentzian FWHM) and z = Z/sqrt(v), the analytic
 * function f(Z) = w(z)/sqrt(pi v) carries everything: V = Re f, dV/dx = Re f', dV/dgamma = -Im f' and,
 * as V obeys the heat equation in sigma^2, dV/d(sigma^2) = Re f''/2. Each region gives these times a
 * constant (see `quad`).
 *
 *   far     |z| > 25  asymptotic series in v/Z^2, which needs no 1/v: exact down to v = 0
 *   middle  |z| > 7   12 terms of the Laplace continued fraction, rearranged so that f' and f'' come
 *                     out as ratios of polynomials in z^2, without cancellation
 *   core              Weideman's series of 32 terms; w' and w'' by the differential equation of w
 *
 * The region is chosen for a chunk of lanes at a time, by its point nearest to the node. */
#include "numeric/voigt_rung.h"

#include <math.h>
#include <string.h>

typedef double vec __attribute__((vector_size(8 * LW_LANES)));
typedef long long mask __attribute__((vector_size(8 * LW_LANES)));
#define INLINE static inline __attribute__((always_inline))

#define FAR 625.0 /* squares of |z| that part the regions */
#define MIDDLE 49.0
#define BLEND 2500.0 /* a nearer chunk that reaches further than this is blended with the far series */

#define ONE_PI 0.31830988618379067154
#define ONE_SQRT_PI 0.56418958354775628695
#define SQRT_PI 1.7724538509055160273
#define LN2 0.69314718055994530942

/* Weideman's L = sqrt(N/sqrt 2) and coefficients for N = 32: cosine coefficients of
 * exp(-t^2) (L^2 + t^2), t = L tan(theta/2); absolute error of w below 4e-14 for every y >= 0. */
#define CORE_TERMS 32
#define CORE_L 4.7568284600108842669
static const double core_a[CORE_TERMS] = {
    2.572253408124569313,      2.263537299900267782,      1.825669629632481319,
    1.345544169234545134,      0.9019254893647999817,     0.5460139720639342329,
    0.2954445107150873226,     0.1406071622689378479,     0.05730440352983719074,
    0.01900615578484547556,    0.00451954110534928564,    0.0003925913607007896469,
    -0.0002453298027001811876, -0.0001307544925460985417, -0.00002140961920181826252,
    6.821031944000644954e-6,   4.401531731530374201e-6,   4.255833137355631557e-7,
    -4.184076371185529253e-7,  -1.481307891793793043e-7,  2.293043903089130642e-8,
    2.379755670492633234e-8,   8.124889174050190491e-10,  -3.20801522060210889e-9,
    -5.231022115795881263e-10, 4.153742283768117825e-10,  1.165823850551326933e-10,
    -5.544247434751947981e-11, -2.154362353454025907e-11, 8.0303941233429979e-12,
    3.741034357970914714e-12,  -1.303348124509092528e-12};

/* Twelve convergents of the continued fraction, w = i/(sqrt(pi) z) (1 + (1 + S)/(2 z^2)), S = U/P;
 * coefficients of ascending powers of z^2 (exact). */
static const double middle_p[7] = {
    10395.0 / 64, -31185.0 / 16, 51975.0 / 16, -3465.0 / 2, 1485.0 / 4, -33, 1};
static const double middle_u[6] = {-10395.0 / 64, 51975.0 / 32, -12645.0 / 8, 1785.0 / 4, -183.0 / 4, 1.5};

/* S of the asymptotic series is far_c[k] (v/Z^2)^(k+1), far_c[k] = (2k+3)!!/2^(k+1). */
static const double far_c[5] = {1.5, 3.75, 13.125, 59.0625, 324.84375};

/* One node, prepared: weights that multiply the parts of `quad`, and between which offsets of the chunk
 * the far series, or at least the middle one, does not hold. */
typedef struct prepared {
    double offset, gamma, value, position_x, position_gamma, lorentz, variance;
    double shape_x[LW_VOIGT_SHAPES], shape_v[LW_VOIGT_SHAPES];
    double far_low, far_high, middle_low, middle_high;
} prepared;
#define PREPARED_MOST 48

/* -pi V, pi dV/dx, pi dV/dgamma, -(pi/2) d2V/dx2: what the far series gives without a further product. */
typedef struct quad {
    vec v, x, gamma, xx;
} quad;

INLINE vec all(double value)
{
    return (vec){0} + value;
}

/* Real polynomial of a complex argument q: re + i im = sum c[k stride] q^k, by the recurrence in
 * t = 2 Re q and m = |q|^2 that needs two multiply-adds a coefficient. */
INLINE void polynomial(const double *c, int count, int stride, vec qr, vec qi, vec t, vec m, vec *re, vec *im)
{
    vec b2 = all(c[(count - 1) * stride]), b1 = c[(count - 2) * stride] + t * b2;
#pragma GCC unroll 40
    for (int k = count - 3; k >= 1; k--) {
        vec b = (c[k * stride] - m * b2) + t * b1;
        b2 = b1;
        b1 = b;
    }
    *re = (c[0] - m * b2) + qr * b1;
    *im = qi * b1;
}

INLINE quad far_out(vec x, double gamma, double v, int values_only)
{
    quad out = {.v = all(0.0)};
    vec d = 1.0 / (x * x + gamma * gamma);
    vec ur = x * d, ui = -gamma * d;                 /* U = 1/Z */
    vec pr = ur * ur - ui * ui, pi = (ur + ur) * ui; /* U^2 */
    vec qr = v * pr, qi = v * pi, vd = v * d, sr, si;
    polynomial(far_c, 5, 1, qr, qi, qr + qr, vd * vd, &sr, &si);
    vec hr = pr * sr - pi * si, hi = pr * si + pi * sr;               /* U^2 S/q */
    vec wr = (pr + qr * hr) - qi * hi, wi = (pi + qr * hi) + qi * hr; /* U^2 (1 + S) */
    out.v = ui + (0.5 * v) * (ur * wi + ui * wr);
    if (values_only)
        return out;
    out.x = wi;
    out.gamma = wr;
    hr -= 0.5 * wr;
    hi -= 0.5 * wi;
    out.xx = ur * hi + ui * hr;
    return out;
}

INLINE quad middle(vec x, double y, double s, int values_only)
{
    quad out = {.v = all(0.0)};
    vec x2 = x * x, zr = x2 - y * y, zi = (2.0 * y) * x, r2 = x2 + y * y, m = r2 * r2, t = zr + zr;
    vec ar, ai, br, bi;
    polynomial(middle_u, 6, 1, zr, zi, t, m, &ar, &ai);
    polynomial(middle_p, 7, 1, zr, zi, t, m, &br, &bi);
    vec d = 1.0 / (br * br + bi * bi), e = 1.0 / r2;
    vec sr = (ar * br + ai * bi) * d, si = (ai * br - ar * bi) * d; /* S */
    vec ur = x * e, ui = -y * e;                                    /* 1/z */
    vec hr = 0.5 * (ur * ur - ui * ui), hi = ur * ui;
    vec rr = (hr + hr * sr) - hi * si, ri = (hi + hi * sr) + hr * si; /* R */
    out.v = s * (ui + (ur * ri + ui * rr));
    if (values_only)
        return out;
    out.x = (2.0 * s * s) * ri;
    out.gamma = (2.0 * s * s) * rr;
    vec gr = sr - rr, gi = si - ri;
    out.xx = (s * s * s) * (ur * gi + ui * gr);
    return out;
}

INLINE quad core(vec x, double y, double s, int values_only)
{
    quad out = {.v = all(0.0)};
    vec d = 1.0 / (x * x + (CORE_L + y) * (CORE_L + y));
    vec gr = (CORE_L + y) * d, gi = x * d; /* 1/(L - iz) */
    vec zr = (CORE_L - y) * gr - x * gi, zi = (CORE_L - y) * gi + x * gr;
    /* even and odd powers apart: two chains of half the length run side by side */
    vec zi2 = zi * zi, m = zr * zr + zi2, qr = zr * zr - zi2, qi = (zr + zr) * zi, er, ei, or, oi;
    polynomial(core_a, CORE_TERMS / 2, 2, qr, qi, qr + qr, m * m, &er, &ei);
    polynomial(core_a + 1, CORE_TERMS / 2, 2, qr, qi, qr + qr, m * m, & or, &oi);
    vec pr = (er + zr * or) - zi * oi, pi = (ei + zr * oi) + zi * or ;
    vec hr = ONE_SQRT_PI + 2.0 * (pr * gr - pi * gi), hi = 2.0 * (pr * gi + pi * gr);
    vec wr = gr * hr - gi * hi;
    out.v = (-s * SQRT_PI) * wr;
    if (values_only)
        return out;
    vec wi = gr * hi + gi * hr;
    vec dr = y * wi - x * wr, di = ONE_SQRT_PI - (x * wi + y * wr); /* w'/2 */
    out.x = (2.0 * s * s * SQRT_PI) * dr;
    out.gamma = (-2.0 * s * s * SQRT_PI) * di;
    out.xx = (s * s * s * SQRT_PI) * (wr + 2.0 * (x * dr - y * di));
    return out;
}

INLINE vec chosen(mask where, vec yes, vec no)
{
    return (vec)((where & (mask)yes) | (~where & (mask)no));
}

INLINE vec load(const double *from, size_t count)
{
    vec value = all(0.0);
    if (count == LW_LANES)
        memcpy(&value, from, sizeof value);
    else
        memcpy(&value, from, count * sizeof *from);
    return value;
}

INLINE void store(double *to, size_t i, size_t count, vec value, int add)
{
    if (add)
        value += load(to + i, count);
    if (count == LW_LANES)
        memcpy(to + i, &value, sizeof value);
    else
        memcpy(to + i, &value, count * sizeof *to);
}

/* All points, one block of nodes. shapes: whether any d_shape is wanted. */
INLINE void sum_block(size_t n, const double *x, const prepared *node, size_t n_nodes, double v,
                      int values_only, int shapes, int add, const lw_voigt_sums *out)
{
    const double s = v > 0 ? 1.0 / sqrt(v) : 0.0;
    for (size_t i = 0; i < n; i += LW_LANES) {
        size_t count = n - i < LW_LANES ? n - i : LW_LANES;
        double first = x[i], last = x[i + count - 1];
        vec points = all(last);
        memcpy(&points, x + i, count * sizeof *x);
        vec value = all(0.0), position = value, variance = value, lorentz = value;
        vec shape[LW_VOIGT_SHAPES] = {value, value};
        for (size_t j = 0; j < n_nodes; j++) {
            const prepared *a = &node[j];
            vec u = points - a->offset;
            quad q;
            if (first > a->far_high || last < a->far_low) {
                q = far_out(u, a->gamma, v, values_only);
            } else {
                if (first > a->middle_high || last < a->middle_low)
                    q = middle(u * s, a->gamma * s, s, values_only);
                else
                    q = core(u * s, a->gamma * s, s, values_only);
                double low = first - a->offset, high = last - a->offset, reach = fmax(-low, high);
                if (reach * reach > BLEND * v) {
                    /* a coarse step: some points of the chunk may lie far out all the same */
                    quad f = far_out(u, a->gamma, v, values_only);
                    mask where = (mask)(u * u > FAR * v);
                    q.v = chosen(where, f.v, q.v);
                    if (!values_only) {
                        q.x = chosen(where, f.x, q.x);
                        q.gamma = chosen(where, f.gamma, q.gamma);
                        q.xx = chosen(where, f.xx, q.xx);
                    }
                }
            }
            value += a->value * q.v;
            if (values_only)
                continue;
            position += a->position_x * q.x + a->position_gamma * q.gamma;
            variance += a->variance * q.xx;
            lorentz += a->lorentz * q.gamma;
            if (shapes)
                for (int k = 0; k < LW_VOIGT_SHAPES; k++)
                    shape[k] += a->shape_v[k] * q.v + a->shape_x[k] * q.x;
        }
        store(out->value, i, count, value, add);
        if (values_only)
            continue;
        store(out->d_position, i, count, position, add);
        store(out->d_variance, i, count, variance, add);
        store(out->d_lorentz, i, count, lorentz, add);
        if (shapes)
            for (int k = 0; k < LW_VOIGT_SHAPES; k++)
                if (out->d_shape[k] != NULL)
                    store(out->d_shape[k], i, count, shape[k], add);
    }
}

/* Up to which distance |x| the square of |Z| is at most `square`; -infinity if never. */
static double reach_of(double square, double gamma)
{
    double left = square - gamma * gamma;
    return left >= 0 ? sqrt(left) : -INFINITY;
}

void LW_RUNG_SUM(size_t n, const double *x, const lw_voigt_node *node, size_t n_nodes, double gauss_variance,
                 double lorentz, int values_only, const lw_voigt_sums *out)
{
    prepared block[PREPARED_MOST];
    const double v = gauss_variance / (4 * LN2); /* 2 sigma^2 */
    int shapes = !values_only && (out->d_shape[0] != NULL || out->d_shape[1] != NULL), add = 0;
    do { /* once even without nodes: the sums are then zero */
        size_t count = n_nodes < PREPARED_MOST ? n_nodes : PREPARED_MOST;
        for (size_t j = 0; j < count; j++) {
            double weight = node[j].weight * ONE_PI, gamma = 0.5 * (lorentz + node[j].lorentz);
            double far = reach_of(FAR * v, gamma), near = reach_of(MIDDLE * v, gamma);
            block[j] = (prepared){.offset = node[j].offset,
                                  .gamma = gamma,
                                  .value = -weight,
                                  .position_x = -weight * (1 + node[j].offset_slope),
                                  .position_gamma = 0.5 * weight * node[j].lorentz_slope,
                                  .lorentz = 0.5 * weight,
                                  .variance = -weight / (8 * LN2),
                                  .far_low = node[j].offset - far,
                                  .far_high = node[j].offset + far,
                                  .middle_low = node[j].offset - near,
                                  .middle_high = node[j].offset + near};
            for (int k = 0; k < LW_VOIGT_SHAPES; k++) {
                block[j].shape_x[k] = -weight * node[j].d_offset[k];
                block[j].shape_v[k] = -ONE_PI * node[j].d_weight[k];
            }
        }
        if (values_only)
            sum_block(n, x, block, count, v, 1, 0, add, out);
        else if (shapes)
            sum_block(n, x, block, count, v, 0, 1, add, out);
        else
            sum_block(n, x, block, count, v, 0, 0, add, out);
        node += count;
        n_nodes -= count;
        add = 1;
    } while (n_nodes > 0);
}
