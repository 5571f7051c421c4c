# SPDX-License-Identifier: GPL-3.0-or-later
# Tests of the floor `numeric`.
lw_test(voigt kernel/voigt_test.c)

# libcerf serves as an independent reference where it is installed; without it the test says what it skips.
pkg_check_modules(CERF IMPORTED_TARGET libcerf)
if(CERF_FOUND)
  target_link_libraries(test_voigt PRIVATE PkgConfig::CERF)
  target_compile_definitions(test_voigt PRIVATE LW_HAVE_CERF)
endif()

lw_test(least_squares kernel/least_squares_test.c)
lw_test(fft kernel/fft_test.c)
lw_test(strd published/strd_test.c)
lw_test(voigt_published published/voigt_published_test.c)
lw_test(straight_line published/straight_line_test.c)
lw_test(transform published/transform_test.c)
# the reference library for tails and nodes
pkg_check_modules(GSL REQUIRED IMPORTED_TARGET gsl>=2.7)
lw_test(statistics kernel/statistics_test.c PkgConfig::GSL)
lw_test(random published/random_test.c)
