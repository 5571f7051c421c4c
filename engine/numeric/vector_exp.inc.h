/* SPDX-License-Identifier: GPL-3.0-or-later */
/* exp() of several numbers at once, for the rungs. The includer has defined `vec` (LW_LANES doubles), `mask`
 * (as many 64-bit integers) and INLINE. Arguments from -inf to 700; within 2 units in the last place of
 * exp(), and 0 below -700. exp(x) = 2^n exp(r), n the nearest integer to x/ln 2, ln 2 taken off in two parts
 * (Cody & Waite 1980, Software Manual for the Elementary Functions), exp(r) by its Taylor series: 13 terms
 * leave 5e-18 at |r| = ln(2)/2. */
#ifndef LW_NUMERIC_VECTOR_EXP_INC_H
#define LW_NUMERIC_VECTOR_EXP_INC_H

INLINE vec vector_exp(vec x)
{
    static const double inverse_factorial[14] = {1.0,
                                                 1.0,
                                                 1.0 / 2,
                                                 1.0 / 6,
                                                 1.0 / 24,
                                                 1.0 / 120,
                                                 1.0 / 720,
                                                 1.0 / 5040,
                                                 1.0 / 40320,
                                                 1.0 / 362880,
                                                 1.0 / 3628800,
                                                 1.0 / 39916800,
                                                 1.0 / 479001600,
                                                 1.0 / 6227020800};
    const double shift =
        6755399441055744.0; /* 1.5 x 2^52: adding it leaves the nearest integer in the low bits */
    mask small = (mask)(x < -700.0);
    x = (vec)((mask)x & ~small);
    vec shifted = x * 1.44269504088896340736 + shift, whole = shifted - shift;
    vec r = (x - whole * 0.693147180369123816490) - whole * 1.90821492927058770002e-10,
        sum = (vec){0} + inverse_factorial[13];
    for (int k = 12; k >= 0; k--)
        sum = sum * r + inverse_factorial[k];
    mask power = (mask)shifted << 52; /* to the exponent's place; the bits of the shift fall off */
    return (vec)(((mask)sum + power) & ~small);
}

#endif
