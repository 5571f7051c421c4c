/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Profiles at one wavelength: axial copies against quadrature of the published weights, widths against tables of the
 * profile, and the empirical shapes against numerical integration. */
#include "check.h"
#include "line/nodes.h"
#include "line/shape.h"
#include "line/width_figure.h"

#include <stdlib.h>

static const double degree = M_PI / 180;

/* Profile from the copies. */
static double from_nodes(const lw_voigt_node *node, size_t n, double x, double gauss, double lorentz)
{
    double sum = 0;
    for (size_t i = 0; i < n; i++)
        sum += node[i].weight * lw_voigt(x - node[i].offset, gauss, lorentz);
    return sum;
}

/* Finger, Cox & Jephcoat (1994) J. Appl. Cryst. 27, 892, their integral over 2phi with 2phi = 2theta + limit s^2:
 * D = W/(h cos(2phi)), h = sqrt(cos^2(2phi)/cos^2(2theta) - 1), W = H + S - h beyond the inflection, 2 min(H, S) before. */
static double finger_by_quadrature(double s, double h, double two_theta, double limit, double x, double gauss,
                                   double lorentz)
{
    enum { STEPS = 4000 };
    double sum = 0, all = 0;
    for (int i = 0; i < STEPS; i++) {
        double t = (i + 0.5) / STEPS, shift = limit * t * t, c = cos((two_theta + shift) * degree);
        double over = c / cos(two_theta * degree), height = sqrt(over * over - 1);
        double w = height < fabs(h - s) ? 2 * fmin(h, s) : h + s - height;
        double weight = fmax(w, 0) / (height * fabs(c)) * t;
        sum += weight * lw_voigt(x - shift, gauss, lorentz);
        all += weight;
    }
    return sum / all;
}

static void finger_copies(void)
{
    /* limits of check values: acos(cos(2theta) sqrt(0.04^2 + 1)) - 2theta */
    static const double angle[3] = {20, 40, 140}, limit[3] = {-0.126267, -0.054635, 0.054635};
    static const double size[2][2] = {{0.02, 0.02}, {0.028, 0.012}};
    for (int a = 0; a < 3; a++)
        for (int k = 0; k < 2; k++) {
            lw_voigt_node node[LW_AXIAL_NODES_MOST];
            size_t n = lw_axial_nodes(LW_AXIAL_FINGER, size[k], angle[a], 0.004, node);
            double sum = 0, furthest = 0;
            for (size_t i = 0; i < n; i++) {
                sum += node[i].weight;
                CHECK(node[i].weight > 0);
                furthest = fmax(furthest, node[i].offset / limit[a]);
            }
            CHECK_NEAR(sum, 1, 1e-12);
            CHECK(furthest < 1.00001 && furthest > 0.9);
            static const double width[2] = {0.03, 0.08};
            for (int w = 0; w < 2; w++) {
                double gauss = 0.8 * width[w], lorentz = 0.35 * width[w], fwhm = lw_voigt_fwhm(gauss, lorentz), peak = 0;
                n = lw_axial_nodes(LW_AXIAL_FINGER, size[k], angle[a], fwhm, node);
                for (int i = -30; i <= 30; i++)
                    peak = fmax(peak, from_nodes(node, n, 0.01 * i, gauss, lorentz));
                for (int i = -30; i <= 30; i++)
                    CHECK_NEAR(from_nodes(node, n, 0.01 * i, gauss, lorentz),
                               finger_by_quadrature(size[k][0], size[k][1], angle[a], limit[a], 0.01 * i, gauss, lorentz),
                               4e-3 * peak);
            }
        }
}

/* Density of the mean of four variables uniform on -1..1 (cubic B-spline), at u in 0..1, unit area over -1..1. */
static double spline(double u)
{
    return u < 0.5 ? (4 - 24 * u * u + 24 * u * u * u) / 3 : 8 * (1 - u) * (1 - u) * (1 - u) / 3;
}

static double soller_by_quadrature(const double most[2], double two_theta, double x, double gauss, double lorentz)
{
    enum { STEPS = 240 };
    double sum = 0, tangent = tan(two_theta * degree / 2);
    for (int i = 0; i < STEPS; i++)
        for (int j = 0; j < STEPS; j++) {
            double m = (i + 0.5) / STEPS, p = (j + 0.5) / STEPS;
            double shift = (-most[0] * most[0] * m * m / tangent + most[1] * most[1] * p * p * tangent) / degree;
            sum += spline(m) * spline(p) * lw_voigt(x - shift, gauss, lorentz);
        }
    return 4 * sum / STEPS / STEPS;
}

static void soller_copies(void)
{
    static const double most[2] = {0.04, 0.03}, angle[4] = {20, 45, 90, 150};
    for (int a = 0; a < 4; a++) {
        double tangent = tan(angle[a] * degree / 2);
        static lw_voigt_node node[LW_AXIAL_NODES_MOST];
        size_t n = lw_axial_nodes(LW_AXIAL_SOLLER, most, angle[a], 0.05, node);
        double sum = 0, mean = 0, square = 0;
        for (size_t i = 0; i < n; i++) {
            sum += node[i].weight;
            mean += node[i].weight * node[i].offset;
            square += node[i].weight * node[i].offset * node[i].offset;
        }
        /* mean square of the spline 1/12, mean fourth power 0.01875 (excess -0.3): closed forms */
        double low = most[0] * most[0] / tangent / degree, high = most[1] * most[1] * tangent / degree;
        double want = (high - low) / 12, variance = (low * low + high * high) * (0.01875 - 1.0 / 144);
        CHECK_NEAR(sum, 1, 1e-12);
        CHECK_NEAR(mean, want, 1e-10);
        if (low > 0.01 && high > 0.01) /* a part carried by its mean alone has no variance */
            CHECK_NEAR(square - mean * mean, variance, 1e-6 * variance);
        double gauss = 0.04, lorentz = 0.015, fwhm = lw_voigt_fwhm(gauss, lorentz), peak = 0, worst = 0;
        n = lw_axial_nodes(LW_AXIAL_SOLLER, most, angle[a], fwhm, node);
        for (int i = -12; i <= 12; i++)
            peak = fmax(peak, from_nodes(node, n, 0.02 * i, gauss, lorentz));
        for (int i = -12; i <= 12; i++)
            worst = fmax(worst, fabs(from_nodes(node, n, 0.02 * i, gauss, lorentz) -
                                     soller_by_quadrature(most, angle[a], 0.02 * i, gauss, lorentz)));
        CHECK(worst < 3e-3 * peak); /* measured 7e-4 to 2e-3 */
    }
}

/* The copies leave no ripple: on a tail much longer than the width the profile falls without a second top. */
static void no_ripple(void)
{
    static const double most[2] = {0.05, 0.001};
    static lw_voigt_node node[LW_AXIAL_NODES_MOST];
    double gauss = 0.035;
    size_t n = lw_axial_nodes(LW_AXIAL_SOLLER, most, 25, gauss, node);
    CHECK(n > 8);
    double before = 0, peak = 0;
    bool falling = false;
    int turns = 0;
    for (int i = 300; i >= -900; i--) {
        double value = from_nodes(node, n, 0.001 * i, gauss, 0);
        if (value > 1e-6 * peak) {
            turns += falling && value > before * (1 + 1e-12);
            falling = value < before;
        }
        peak = fmax(peak, value);
        before = value;
    }
    CHECK(turns == 0);
}

static void caglioti(void)
{
    /* U, V, W = 0.0042, -0.0028, 0.0058 deg^2: closed form, minimum at tan(theta) = -V/(2U) */
    static const double value[LW_WIDTH_PARAMETERS] = {[LW_U] = 0.0042, [LW_V] = -0.0028, [LW_W] = 0.0058};
    CHECK_NEAR(sqrt(lw_width_gauss_variance(value, 30, NULL)), 0.0731525, 1e-7);
    CHECK_NEAR(sqrt(lw_width_gauss_variance(value, 90, NULL)), 0.0848528, 1e-7);
    CHECK_NEAR(sqrt(lw_width_gauss_variance(value, 140, NULL)), 0.1726595, 1e-7);
    CHECK_NEAR(sqrt(lw_width_gauss_variance(value, 36.869898, NULL)), 0.0730297, 1e-7);
    CHECK(lw_width_gauss_variance(value, 36.7, NULL) > lw_width_gauss_variance(value, 36.869898, NULL));
}

/* Width figures against a fine table of the profile, and their uncertainties against differences. */
static void width_figures(void)
{
    lw_width_function f = {.axial = LW_AXIAL_SOLLER};
    f.value[LW_U] = 3e-4;
    f.value[LW_W] = 7e-4;
    f.value[LW_X] = 0.004;
    f.value[LW_Y] = 0.006;
    f.value[LW_AXIAL_1] = 0.045;
    f.value[LW_AXIAL_2] = 0.03;
    static const int which[4] = {LW_U, LW_W, LW_Y, LW_AXIAL_1};
    for (int i = 0; i < 4; i++)
        f.covariance[which[i]][which[i]] = pow(0.02 * f.value[which[i]], 2);
    f.covariance[LW_U][LW_W] = f.covariance[LW_W][LW_U] = -0.5 * 0.02 * 0.02 * f.value[LW_U] * f.value[LW_W];
    static const double angle[3] = {22, 80, 140};
    for (int a = 0; a < 3; a++) {
        lw_width_figure got;
        double own_variance = 2e-4, own_lorentz = 0.003;
        lw_width_figure_at(&f, angle[a], own_variance, own_lorentz, &got);
        static lw_voigt_node node[LW_AXIAL_NODES_MOST];
        double variance = lw_width_gauss_variance(f.value, angle[a], NULL) + own_variance;
        double lorentz = lw_width_lorentz(f.value, angle[a], NULL) + own_lorentz, gauss = sqrt(variance);
        size_t n = lw_axial_nodes(f.axial, f.value + LW_AXIAL_1, angle[a], lw_voigt_fwhm(gauss, lorentz), node);
        double peak = 0, top = 0, left = 0, right = 0, step = 2e-5;
        for (int i = -10000; i <= 10000; i++) {
            double v = from_nodes(node, n, i * step, gauss, lorentz);
            if (v > peak) {
                peak = v;
                top = i * step;
            }
        }
        for (left = top; from_nodes(node, n, left, gauss, lorentz) > 0.5 * peak;)
            left -= step;
        for (right = top; from_nodes(node, n, right, gauss, lorentz) > 0.5 * peak;)
            right += step;
        CHECK_NEAR(got.top_deg, top, 2 * step);
        CHECK_NEAR(got.fwhm_deg, right - left, 2 * step);
        CHECK_RELATIVE(got.breadth_deg, 1 / peak, 1e-6);
        double slope[4][2];
        for (int i = 0; i < 4; i++) {
            lw_width_function moved = f;
            lw_width_figure up, down;
            double h = 1e-4 * f.value[which[i]];
            moved.value[which[i]] += h;
            lw_width_figure_at(&moved, angle[a], own_variance, own_lorentz, &up);
            moved.value[which[i]] -= 2 * h;
            lw_width_figure_at(&moved, angle[a], own_variance, own_lorentz, &down);
            slope[i][0] = (up.fwhm_deg - down.fwhm_deg) / (2 * h);
            slope[i][1] = (up.breadth_deg - down.breadth_deg) / (2 * h);
        }
        double sum[2] = {0, 0};
        for (int q = 0; q < 2; q++)
            for (int i = 0; i < 4; i++)
                for (int j = 0; j < 4; j++)
                    sum[q] += slope[i][q] * slope[j][q] * f.covariance[which[i]][which[j]];
        CHECK_RELATIVE(got.u_fwhm, sqrt(sum[0]), 1e-4);
        CHECK_RELATIVE(got.u_breadth, sqrt(sum[1]), 1e-4);
        lw_width_figure more;
        lw_width_figure_at(&f, angle[a], own_variance, own_lorentz + 1e-6, &more);
        CHECK_RELATIVE(got.d_fwhm[1], (more.fwhm_deg - got.fwhm_deg) / 1e-6, 1e-3);
        lw_width_figure_at(&f, angle[a], own_variance + 1e-8, own_lorentz, &more);
        CHECK_RELATIVE(got.d_breadth[0], (more.breadth_deg - got.breadth_deg) / 1e-8, 1e-3);
    }
}

/* Area, FWHM, breadth and slopes of an empirical shape against the numerical ones. */
static void empirical_shapes(void)
{
    static const double local[4][4] = {{0.1, 0.4}, {0.1, 1.8}, {0.08, 0.13, 0.2, 0.9}, {0.08, 0.13, 1.3, 4}};
    for (int k = 0; k < 4; k++) {
        const lw_line_shape *shape = lw_line_shape_list[3 + k];
        double d_x, d[LW_LOCAL_MOST], area = 0, reach = 1e3;
        /* x = tan: the tails go to infinity */
        enum { STEPS = 200000 };
        for (int i = 0; i < STEPS; i++) {
            double a = (-0.5 + (i + 0.5) / STEPS) * M_PI, x = 0.1 * tan(a);
            area += lw_line_shape_value(shape, x, local[k], &d_x, d) * 0.1 / (cos(a) * cos(a)) * M_PI / STEPS;
        }
        CHECK_NEAR(area, 1, 1e-4);
        double fwhm, breadth, d_fwhm[LW_LOCAL_MOST], d_breadth[LW_LOCAL_MOST];
        shape->breadths(local[k], &fwhm, &breadth, d_fwhm, d_breadth);
        double top = lw_line_shape_value(shape, 0, local[k], &d_x, d), edge[2];
        for (int side = 0; side < 2; side++) {
            double in = 0, out = reach;
            for (int i = 0; i < 100; i++) {
                double x = 0.5 * (in + out);
                if (lw_line_shape_value(shape, side ? x : -x, local[k], &d_x, d) > 0.5 * top)
                    in = x;
                else
                    out = x;
            }
            edge[side] = in;
        }
        CHECK_RELATIVE(fwhm, edge[0] + edge[1], 1e-9);
        CHECK_RELATIVE(breadth, 1 / top, 1e-9);
        for (int i = 0; i < shape->n_local; i++)
            for (int s = 0; s < 2; s++) {
                double x = s ? 0.07 : -0.06, up[4], down[4], h = 1e-5 * local[k][i], unused[8];
                memcpy(up, local[k], sizeof up);
                memcpy(down, local[k], sizeof down);
                up[i] += h;
                down[i] -= h;
                lw_line_shape_value(shape, x, local[k], &d_x, d);
                double difference = (lw_line_shape_value(shape, x, up, &d_x, unused) - lw_line_shape_value(shape, x, down, &d_x, unused)) / (2 * h);
                CHECK_NEAR(d[i], difference, 1e-6 * (fabs(difference) + 1));
                double fw, br[2];
                shape->breadths(up, &fw, &br[0], unused, unused + 4);
                shape->breadths(down, &fw, &br[1], unused, unused + 4);
                CHECK_NEAR(d_breadth[i], (br[0] - br[1]) / (2 * h), 1e-6);
            }
    }
    /* limits in closed form: Lorentzian pi/2, Gaussian sqrt(pi/ln 2)/2 times the FWHM */
    double fwhm, breadth, a[4], b[4];
    lw_line_shape_list[4]->breadths((const double[4]){0.2, 1}, &fwhm, &breadth, a, b);
    CHECK_RELATIVE(breadth, 0.1 * M_PI, 1e-12);
    lw_line_shape_list[3]->breadths((const double[4]){0.2, 0}, &fwhm, &breadth, a, b);
    CHECK_RELATIVE(breadth, 0.1 * sqrt(M_PI / log(2)), 1e-12);
    lw_line_shape_list[3]->breadths((const double[4]){0.2, 1}, &fwhm, &breadth, a, b);
    CHECK_RELATIVE(breadth, 0.1 * M_PI, 1e-12);
}

int main(void)
{
    finger_copies();
    soller_copies();
    no_ripple();
    caglioti();
    width_figures();
    empirical_shapes();
    return lw_checks_end();
}
