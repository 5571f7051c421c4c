/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/voigt.h"
#include "numeric/voigt_rung.h"

#include <math.h>

#define PI 3.14159265358979323846
#define SQRT_PI 1.7724538509055160273
#define LN2 0.69314718055994530942

const lw_voigt_kernel *lw_voigt_kernel_for(lw_cpu cpu)
{
    static const lw_voigt_kernel plain = {"plain", lw_voigt_sum_plain};
#ifdef LW_RUNGS_X86
    static const lw_voigt_kernel avx2 = {"avx2", lw_voigt_sum_avx2};
    static const lw_voigt_kernel avx512 = {"avx512", lw_voigt_sum_avx512};
    if ((cpu == LW_CPU_AUTO || cpu == LW_CPU_AVX512) && __builtin_cpu_supports("avx512f") &&
        __builtin_cpu_supports("avx512bw") && __builtin_cpu_supports("avx512cd") &&
        __builtin_cpu_supports("avx512dq") && __builtin_cpu_supports("avx512vl"))
        return &avx512;
    if (cpu != LW_CPU_PLAIN && __builtin_cpu_supports("avx2") && __builtin_cpu_supports("fma"))
        return &avx2;
#endif
    (void)cpu;
    return &plain;
}

/* f(Z), f'(Z), f''(Z) by the asymptotic series in q = v/Z^2, for |z| > 10, where its smallest term is
 * below 1e-40. Notation of voigt_rung.inc.h. */
static void far_out(double x, double gamma, double v, double d[4])
{
    double size = hypot(x, gamma), ur = x / size / size, ui = -gamma / size / size; /* 1/Z */
    double pr = ur * ur - ui * ui, pi = 2 * ur * ui, qr = v * pr, qi = v * pi;
    /* S1 = sum c_k q^k with c_k = (2k+3)!!/2^(k+1); powers until they no longer count */
    double sr = 0, si = 0, tr = 1.5, ti = 0;
    for (int k = 0; k < 40 && fabs(tr) + fabs(ti) > 1e-18; k++) {
        sr += tr;
        si += ti;
        double c = 0.5 * (2 * k + 5), r = c * (tr * qr - ti * qi);
        ti = c * (tr * qi + ti * qr);
        tr = r;
    }
    double ar = 1 + qr * sr - qi * si, ai = qr * si + qi * sr; /* 1 + S */
    double wr = pr * ar - pi * ai, wi = pr * ai + pi * ar;
    double gr = sr - 0.5 * ar, gi = si - 0.5 * ai;
    d[0] = -(ui + 0.5 * v * (ur * wi + ui * wr)) / PI;
    d[1] = wi / PI;
    d[2] = 0.5 * wr / PI;
    d[3] = -2 * ((ur * pr - ui * pi) * gi + (ur * pi + ui * pr) * gr) / PI / (16 * LN2);
}

void lw_voigt_derivatives(double x, double gauss_variance, double lorentz_fwhm, double d[4])
{
    double gamma = 0.5 * lorentz_fwhm, v = gauss_variance / (4 * LN2);
    if (x * x + gamma * gamma > 100 * v) {
        far_out(x, gamma, v, d);
        return;
    }
    double s = 1 / sqrt(v), y = gamma * s, wr, wi;
    x *= s;
    lw_faddeeva(x, y, &wr, &wi);
    double dr = -2 * (x * wr - y * wi), di = 2 / SQRT_PI - 2 * (x * wi + y * wr);
    d[0] = s / SQRT_PI * wr;
    d[1] = s * s / SQRT_PI * dr;
    d[2] = -0.5 * s * s / SQRT_PI * di;
    d[3] = -2 * s * s * s / SQRT_PI * (wr + (x * dr - y * di)) / (16 * LN2);
}

double lw_voigt(double x, double gauss_fwhm, double lorentz_fwhm)
{
    double gamma = 0.5 * lorentz_fwhm;
    if (gauss_fwhm <= 1e-100 * hypot(x, gamma))
        return gamma / PI / (x * x + gamma * gamma);
    double s = 2 * sqrt(LN2) / gauss_fwhm, re, im;
    lw_faddeeva(x * s, gamma * s, &re, &im);
    return s / SQRT_PI * re;
}

double lw_voigt_fwhm(double gauss_fwhm, double lorentz_fwhm)
{
    if (gauss_fwhm <= 0)
        return lorentz_fwhm;
    if (lorentz_fwhm <= 0)
        return gauss_fwhm;
    /* widths in units of their sum; start from Olivero & Longbothum (1977) JQSRT 17, 233 (2e-4), from
     * which Newton's method doubles the digits */
    double unit = gauss_fwhm + lorentz_fwhm, g = gauss_fwhm / unit, l = lorentz_fwhm / unit;
    double half = 0.5 * (0.5346 * l + sqrt(0.2166 * l * l + g * g)), top[4], side[4];
    lw_voigt_derivatives(0, g * g, l, top);
    for (int i = 0; i < 8; i++) {
        lw_voigt_derivatives(half, g * g, l, side);
        double step = (side[0] - 0.5 * top[0]) / side[1];
        half -= step;
        if (fabs(step) < 1e-15 * half)
            break;
    }
    return 2 * half * unit;
}

double lw_voigt_breadth(double gauss_fwhm, double lorentz_fwhm)
{
    if (gauss_fwhm <= 0)
        return 0.5 * PI * lorentz_fwhm;
    /* erfc(k) exp(k^2) is w on the imaginary axis */
    double gauss = 0.5 * gauss_fwhm * sqrt(PI / LN2), k = sqrt(LN2) * lorentz_fwhm / gauss_fwhm, re, im;
    if (k > 1e30)
        return 0.5 * PI * lorentz_fwhm;
    lw_faddeeva(0, k, &re, &im);
    return gauss / re;
}

void lw_voigt_fwhm_slopes(double gauss_fwhm, double lorentz_fwhm, double d[2])
{
    double half = 0.5 * lw_voigt_fwhm(gauss_fwhm, lorentz_fwhm), top[4], side[4];
    /* V(half) = V(0)/2 holds while the widths move; slopes are free of scale */
    double g = gauss_fwhm / half, l = lorentz_fwhm / half;
    lw_voigt_derivatives(0, g * g, l, top);
    lw_voigt_derivatives(1, g * g, l, side);
    d[0] = -2 * (2 * g) * (side[3] - 0.5 * top[3]) / side[1];
    d[1] = -2 * (side[2] - 0.5 * top[2]) / side[1];
}

void lw_voigt_breadth_slopes(double gauss_fwhm, double lorentz_fwhm, double d[2])
{
    double unit = gauss_fwhm + lorentz_fwhm, g = gauss_fwhm / unit, l = lorentz_fwhm / unit, top[4];
    lw_voigt_derivatives(0, g * g, l, top); /* breadth = 1/V(0) */
    d[0] = -(2 * g) * top[3] / (top[0] * top[0]);
    d[1] = -top[2] / (top[0] * top[0]);
}
