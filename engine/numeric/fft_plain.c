/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/fft_plain.h"

#include <math.h>
#include <string.h>

typedef struct number {
    double re, im;
} number;

bool lw_fft_plain_can(size_t n)
{
    if (n == 0)
        return false;
    while (n % 2 == 0)
        n /= 2;
    while (n % 3 == 0)
        n /= 3;
    while (n % 5 == 0)
        n /= 5;
    return n == 1;
}

void lw_fft_roots(double *root, size_t n)
{
    for (size_t k = 0; 2 * k <= n; k++) {
        double angle = 2 * 3.14159265358979323846 * (double)k / (double)n;
        root[2 * k] = cos(angle);
        root[2 * k + 1] = -sin(angle);
    }
    for (size_t k = n / 2 + 1; k < n; k++) {
        root[2 * k] = root[2 * (n - k)];
        root[2 * k + 1] = -root[2 * (n - k) + 1];
    }
}

static number at(const double *a, size_t k)
{
    return (number){a[2 * k], a[2 * k + 1]};
}

static number plus(number a, number b)
{
    return (number){a.re + b.re, a.im + b.im};
}

static number minus(number a, number b)
{
    return (number){a.re - b.re, a.im - b.im};
}

/* i s a */
static number turned(double s, number a)
{
    return (number){-s * a.im, s * a.re};
}

static number scaled(double s, number a)
{
    return (number){s * a.re, s * a.im};
}

/* out[k] = a w */
static void put(double *out, size_t k, number a, number w)
{
    out[2 * k] = a.re * w.re - a.im * w.im;
    out[2 * k + 1] = a.re * w.im + a.im * w.re;
}

/* Short transforms of a[radix], in place. s: sign of the exponent. */
static void radix3(number *a, double s)
{
    number sum = plus(a[1], a[2]), difference = turned(s * 0.86602540378443864676, minus(a[1], a[2]));
    number middle = minus(a[0], scaled(0.5, sum));
    a[0] = plus(a[0], sum);
    a[1] = plus(middle, difference);
    a[2] = minus(middle, difference);
}

static void radix4(number *a, double s)
{
    number even = plus(a[0], a[2]), odd = plus(a[1], a[3]);
    number even2 = minus(a[0], a[2]), odd2 = turned(s, minus(a[1], a[3]));
    a[0] = plus(even, odd);
    a[1] = plus(even2, odd2);
    a[2] = minus(even, odd);
    a[3] = minus(even2, odd2);
}

static void radix5(number *a, double s)
{
    /* cosines and sines of 2 pi/5 and 4 pi/5 */
    const double c1 = 0.30901699437494742410, c2 = -0.80901699437494742410;
    const double s1 = 0.95105651629515357212, s2 = 0.58778525229247312917;
    number p1 = plus(a[1], a[4]), m1 = minus(a[1], a[4]), p2 = plus(a[2], a[3]), m2 = minus(a[2], a[3]);
    number r1 = plus(a[0], plus(scaled(c1, p1), scaled(c2, p2)));
    number r2 = plus(a[0], plus(scaled(c2, p1), scaled(c1, p2)));
    number i1 = turned(s, plus(scaled(s1, m1), scaled(s2, m2)));
    number i2 = turned(s, minus(scaled(s2, m1), scaled(s1, m2)));
    a[0] = plus(a[0], plus(p1, p2));
    a[1] = plus(r1, i1);
    a[2] = plus(r2, i2);
    a[3] = minus(r2, i2);
    a[4] = minus(r1, i1);
}

void lw_fft_plain(const double *root, size_t stride, size_t n, int sign, const double *in, double *out,
                  double *work)
{
    size_t steps = 0, rest = n;
    for (; rest % 4 == 0; rest /= 4)
        steps++;
    for (size_t r = 2; r <= 5; r++)
        for (; r != 4 && rest % r == 0; rest /= r)
            steps++;
    const double s = sign;
    const double *from = in;
    if (steps == 0)
        memcpy(out, in, 2 * n * sizeof *out);
    /* ping-pong between work and out so that the last step writes out */
    for (size_t length = n, span = 1, step = 0; step < steps; step++) {
        size_t radix = length % 4 == 0   ? 4
                       : length % 2 == 0 ? 2
                       : length % 3 == 0 ? 3
                                         : 5,
               m = length / radix;
        double *to = (steps - step) % 2 == 1 ? out : work;
        for (size_t p = 0; p < m; p++) {
            number w[5];
            for (size_t j = 0; j < radix; j++) {
                w[j] = at(root, j * p * span * stride);
                w[j].im *= -s; /* the roots are those of the forward transform */
            }
            for (size_t q = 0; q < span; q++) {
                number a[5];
                for (size_t k = 0; k < radix; k++)
                    a[k] = at(from, q + span * (p + k * m));
                if (radix == 4)
                    radix4(a, s);
                else if (radix == 2) {
                    number sum = plus(a[0], a[1]);
                    a[1] = minus(a[0], a[1]);
                    a[0] = sum;
                } else if (radix == 3)
                    radix3(a, s);
                else
                    radix5(a, s);
                for (size_t j = 0; j < radix; j++)
                    put(to, q + span * (radix * p + j), a[j], w[j]);
            }
        }
        from = to;
        length = m;
        span *= radix;
    }
}

void lw_fft_plain_forward(const double *root, size_t n, const double *x, double *c, double *work)
{
    /* x as n/2 complex numbers; their transform holds those of the even and the odd points */
    size_t half = n / 2;
    lw_fft_plain(root, 2, half, -1, x, work, work + n);
    for (size_t k = 0; k <= half; k++) {
        number z = at(work, k % half), mirror = at(work, (half - k) % half);
        mirror.im = -mirror.im;
        number odd = turned(-0.5, minus(z, mirror));
        put(c, k, odd, k < half ? at(root, k) : (number){-1, 0});
        c[2 * k] += 0.5 * (z.re + mirror.re);
        c[2 * k + 1] += 0.5 * (z.im + mirror.im);
    }
    c[1] = c[2 * half + 1] = 0;
}

void lw_fft_plain_back(const double *root, size_t n, const double *c, double *x, double *work)
{
    size_t half = n / 2;
    for (size_t k = 0; k < half; k++) {
        number z = at(c, k), mirror = at(c, half - k), w = at(root, k);
        if (k == 0) /* a real function has no imaginary part there */
            z.im = mirror.im = 0;
        mirror.im = -mirror.im;
        w.im = -w.im;
        number even = plus(z, mirror);
        put(work, k, turned(1, minus(z, mirror)), w);
        work[2 * k] += even.re;
        work[2 * k + 1] += even.im;
    }
    lw_fft_plain(root, 2, half, 1, work, x, work + n);
}
