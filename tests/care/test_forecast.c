/*
 * tests/care/test_forecast.c - tails, rows and years of the forecast against GSL, published figures, and brute force
 *
 * Sources stand beside the checks; "recomputed" figures were worked out from the definition outside this project, and
 * stand with their sources in the plan's collection of published facts.
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/forecast.h"

#include "care/forecast_beside.h"
#include "guard/random.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_sf_gamma.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

static void near(double got, double wanted, double relative)
{
    if (!(fabs(got - wanted) <= relative * fabs(wanted)))
        fail_msg("%.17g is not within %g of %.17g", got, relative, wanted);
}

/* --- binomial tails --- */

static void tails_agree_with_gsl(void **state)
{
    static const unsigned trials[] = { 1, 2, 5, 36, 256, 512, 1000 };
    static const double chances[] = { 1e-9, 1e-5, 1e-3, 0.01, 0.05, 0.2, 0.5, 0.8, 0.99 };
    unsigned checked = 0;

    for (size_t i = 0; i < sizeof trials / sizeof trials[0]; i++)
        for (size_t j = 0; j < sizeof chances / sizeof chances[0]; j++)
            for (unsigned more = 0; more < trials[i]; more += 1 + more / 3) {
                double wanted = gsl_cdf_binomial_Q(more, chances[j], trials[i]);

                if (wanted < 1e-290)
                    continue;
                near(exp(firn_forecast_tail(trials[i], more, log(chances[j]))), wanted, 1e-8);
                checked++;
            }
    assert_true(checked > 500);
    (void)state;
}

/* The distribution function of GSL loses digits far out; its single terms do not. Terms past the first few vanish. */
static void far_tails_agree_with_sums_of_gsl_terms(void **state)
{
    static const struct { unsigned trials, more; double chance; } cases[] = {
        { 512, 1, 1e-12 }, { 256, 32, 1e-8 }, { 256, 32, 1e-6 }, { 36, 4, 1e-50 }, { 1000, 20, 1e-15 },
    };

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        double sum = 0;

        for (unsigned j = cases[i].more + 30; j > cases[i].more; j--)
            if (j <= cases[i].trials)
                sum += gsl_ran_binomial_pdf(j, cases[i].chance, cases[i].trials);
        assert_true(sum > 0 && sum < 1e-17);
        near(exp(firn_forecast_tail(cases[i].trials, cases[i].more, log(cases[i].chance))), sum, 1e-10);
    }
    (void)state;
}

/* C(512,3) = 512 * 511 * 510 / 6 = 22 238 720; further terms are smaller by 1e-98. ln C(256,33) from GSL. */
static void tails_hold_to_1e300_and_beyond(void **state)
{
    near(firn_forecast_tail(512, 2, -100 * M_LN10), log(22238720.0) - 300 * M_LN10, 1e-15);
    near(firn_forecast_tail(256, 32, -1000 * M_LN10), gsl_sf_lnchoose(256, 33) - 33000 * M_LN10, 1e-15);
    assert_true(firn_forecast_tail(10, 10, log(0.5)) == -INFINITY);
    assert_true(firn_forecast_tail(10, 0, -INFINITY) == -INFINITY);
    assert_true(firn_forecast_tail(10, 9, 0) == 0);
    near(firn_forecast_tail(10, 9, log(0.5)), 10 * log(0.5), 1e-13);
    /* almost certain: 1 - 2^-1000, 1 - 2^-40 */
    near(firn_forecast_tail(1000, 0, log(0.5)), -ldexp(1, -1000), 1e-9);
    near(firn_forecast_tail(40, 0, log(0.5)), -ldexp(1, -40), 1e-9);
    (void)state;
}

/* All recomputed from the definition: rows of k + m blocks, and code words of n bits with two wrong ones or more. */
static void known_tails(void **state)
{
    near(exp(firn_forecast_tail(10, 2, log(0.01))), 1.138491e-4, 1e-6);
    near(exp(firn_forecast_tail(20, 4, log(0.01))), 1.367799e-6, 1e-6);
    near(exp(firn_forecast_tail(14, 4, log(0.05))), 4.273905e-4, 1e-6);
    near(exp(firn_forecast_tail(8, 1, log(1e-4))), 2.7989e-7, 1e-4);
    near(exp(firn_forecast_tail(72, 1, log(1e-4))), 2.5441e-5, 1e-4);
    near(exp(firn_forecast_tail(512, 1, log(1e-4))), 1.26452e-3, 1e-5);
    near(exp(firn_forecast_tail(512, 1, log(1e-6))), 1.30772e-7, 1e-5);
    (void)state;
}

/* --- small published formulas --- */

/* P(an error in reading) = 1 - (1 - U)^(8 B): 1 TB and 18 TB at datasheet rates, recomputed */
static void reading_errors(void **state)
{
    near(firn_forecast_read_error(18e12, 1e-15), 0.134112, 1e-5);
    near(firn_forecast_read_error(18e12, 1e-14), 0.763072, 1e-5);
    near(firn_forecast_read_error(18e12, 1e-16), 0.0142968, 1e-5);
    near(firn_forecast_read_error(18e12, 1e-19), 1.44e-5, 1e-3);
    near(firn_forecast_read_error(1e12, 1e-14), 0.0768837, 1e-5);
    near(firn_forecast_read_error(1e12, 1e-15), 0.00796809, 1e-5);
    near(firn_forecast_read_error(1e12, 1e-16), 7.9968e-4, 1e-4);
    assert_true(firn_forecast_read_error(1e12, 0) == 0);
    assert_true(firn_forecast_read_error(1, 1) == 1);
    (void)state;
}

/* Renewal theory: fixed intervals 1 - (1 - e^-x) / x, random ones x / (1 + x), recomputed */
static void scrub_arithmetic(void **state)
{
    near(firn_forecast_waiting(0.001, true), 4.998334e-4, 1e-6);
    near(firn_forecast_waiting(0.001, false), 9.990010e-4, 1e-6);
    near(firn_forecast_waiting(0.12, true), 0.05767031, 1e-6);
    near(firn_forecast_waiting(0.12, false), 0.1071429, 1e-6);
    near(firn_forecast_waiting(1, true), 0.3678794, 1e-6);
    near(firn_forecast_waiting(1, false), 0.5, 1e-12);
    near(firn_forecast_waiting(1.0001e-4, true), firn_forecast_waiting(0.9999e-4, true) * 1.0001 / 0.9999, 1e-7);
    assert_true(firn_forecast_waiting(0, true) == 0);
    (void)state;
}

/*
 * M. Baker et al., EuroSys 2006: a visible fault every 1.4e6 hours, a latent one every 2.8e5, 20 minutes to mend
 * either, scrubbed three times a year. The paper's 6128.7 years is from memory; 6128.6 and the full form's 5106.9
 * recomputed from its double-fault argument.
 */
static void baker_two_copies(void **state)
{
    struct firn_forecast_two_copies copies = {
        .visible = 1.4e6, .latent = 2.8e5, .mend_visible = 1.0 / 3, .mend_latent = 1.0 / 3, .notice_latent = 1460,
        .alpha = 1
    };
    const double hours = 8760;

    near(firn_forecast_two_copies(&copies, true) / hours, 6128.6, 2e-5);
    near(firn_forecast_two_copies(&copies, false) / hours, 5106.9, 2e-5);
    near(-expm1(-50 * hours / firn_forecast_two_copies(&copies, true)), 0.0081, 5e-3);
    near(-expm1(-50 * hours / firn_forecast_two_copies(&copies, false)), 0.0097, 5e-3);
    copies.alpha = 0.1;
    near(firn_forecast_two_copies(&copies, true) / hours, 612.9, 1e-4);
    near(-expm1(-50 * hours / firn_forecast_two_copies(&copies, true)), 0.078, 5e-3);
    near(firn_forecast_two_copies(&copies, false) / hours, 510.7, 1e-4);
    near(-expm1(-50 * hours / firn_forecast_two_copies(&copies, false)), 0.093, 5e-3);
    copies.latent = INFINITY;
    near(firn_forecast_two_copies(&copies, false), 0.1 * 1.4e6 * 1.4e6 * 3, 1e-12);
    (void)state;
}

/* --- rows --- */

/* Step by step along every block of the chain, one row's blocks `apart`; every path of states and losses is summed. */
struct brute {
    double stay[2][2];      /* from, to; one row block to the next */
    double lost[2];
    unsigned k, n, m;
    double row, block;
};

static void walk(struct brute *b, unsigned at, unsigned state, double chance, unsigned lost, unsigned data_lost)
{
    if (at == b->n) {
        if (lost > b->m) {
            b->row += chance;
            b->block += chance * data_lost / b->k;
        }
        return;
    }
    for (unsigned is_lost = 0; is_lost < 2; is_lost++) {
        double here = chance * (is_lost ? b->lost[state] : 1 - b->lost[state]);

        for (unsigned next = 0; next < (at + 1 < b->n ? 2U : 1U); next++)
            walk(b, at + 1, next, at + 1 < b->n ? here * b->stay[state][next] : here, lost + is_lost,
                 data_lost + (is_lost && at < b->k));
    }
}

static void brute_force(const struct firn_forecast_row *row, struct brute *b)
{
    double bad = exp(row->ln_bad), r = 1 / row->run_blocks, p = r * bad / (1 - bad);
    const double one[2][2] = { { 1 - p, p }, { r, 1 - r } };

    *b = (struct brute){ .stay = { { 1, 0 }, { 0, 1 } }, .lost = { exp(row->ln_alone), 1 }, .k = row->k,
                         .n = row->k + row->m, .m = row->m };
    for (unsigned step = 0; step < row->apart; step++) {
        double next[2][2];

        for (unsigned i = 0; i < 2; i++)
            for (unsigned j = 0; j < 2; j++)
                next[i][j] = b->stay[i][0] * one[0][j] + b->stay[i][1] * one[1][j];
        memcpy(b->stay, next, sizeof next);
    }
    walk(b, 0, 0, 1 - bad, 0, 0);
    walk(b, 0, 1, bad, 0, 0);
}

static void rows_agree_with_every_path_summed(void **state)
{
    static const struct { unsigned k, m, apart; double alone, bad, run; } cases[] = {
        { 6, 4, 1, 0.01, 0.05, 3 },    { 6, 4, 5, 0.01, 0.05, 3 },   { 5, 4, 8, 0.2, 0.3, 20 },
        { 8, 0, 2, 0.001, 1e-4, 7 },   { 7, 2, 3, 1e-5, 1e-6, 40 },  { 1, 4, 1, 0.1, 0.01, 2 },
        { 6, 4, 100, 0.02, 0.1, 5 },   { 5, 4, 2, 0, 0.01, 1000 },
    };

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct firn_forecast_row row = { cases[i].k, cases[i].m, cases[i].apart, log(cases[i].alone),
                                         log(cases[i].bad), cases[i].run };
        struct firn_forecast_row_loss loss;
        struct brute brute;

        firn_forecast_row(&row, &loss);
        brute_force(&row, &brute);
        assert_true(brute.row > 0);
        near(exp(loss.ln_row), brute.row, 1e-9);
        near(exp(loss.ln_block), brute.block, 1e-9);
    }
    (void)state;
}

/* The same for two rows side by side, whose blocks follow each other in turn: both are lost, in every way they can. */
struct brute_two {
    double near[2][2], far[2][2];      /* first row to second, second to first */
    double lost[2];
    unsigned blocks, m;                /* of both rows */
    double both;
};

static void walk_two(struct brute_two *b, unsigned at, unsigned state, double chance, const unsigned lost[2])
{
    if (at == b->blocks) {
        if (lost[0] > b->m && lost[1] > b->m)
            b->both += chance;
        return;
    }
    for (unsigned is_lost = 0; is_lost < 2; is_lost++)
        for (unsigned next = 0; next < (at + 1 < b->blocks ? 2U : 1U); next++) {
            unsigned now[2] = { lost[0], lost[1] };
            double here = chance * (is_lost ? b->lost[state] : 1 - b->lost[state]);

            now[at % 2] += is_lost;
            if (at + 1 < b->blocks)
                here *= at % 2 == 0 ? b->near[state][next] : b->far[state][next];
            walk_two(b, at + 1, next, here, now);
        }
}

static void power(const double one[2][2], unsigned steps, double out[2][2])
{
    memcpy(out, (const double[2][2]){ { 1, 0 }, { 0, 1 } }, sizeof(double[2][2]));
    while (steps-- > 0) {
        double next[2][2];

        for (unsigned i = 0; i < 2; i++)
            for (unsigned j = 0; j < 2; j++)
                next[i][j] = out[i][0] * one[0][j] + out[i][1] * one[1][j];
        memcpy(out, next, sizeof next);
    }
}

static void rows_side_by_side_agree_with_every_path_summed(void **state)
{
    static const struct { unsigned k, m, apart; double alone, bad, run; } cases[] = {
        { 2, 2, 3, 0.01, 0.05, 3 }, { 3, 2, 8, 0.05, 0.3, 20 }, { 1, 0, 2, 0.01, 0.02, 6 }, { 3, 2, 2, 1e-3, 0.01, 50 },
    };

    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        const struct firn_forecast_row row = { cases[i].k, cases[i].m, cases[i].apart, log(cases[i].alone),
                                               log(cases[i].bad), cases[i].run };
        const double r = 1 / cases[i].run, p = r * cases[i].bad / (1 - cases[i].bad);
        const double one[2][2] = { { 1 - p, p }, { r, 1 - r } };
        struct brute_two b = { .lost = { cases[i].alone, 1 }, .blocks = 2 * (row.k + row.m), .m = row.m };
        struct firn_forecast_row_loss loss;

        power(one, 1, b.near);
        power(one, cases[i].apart - 1, b.far);
        walk_two(&b, 0, 0, 1 - cases[i].bad, (const unsigned[2]){ 0, 0 });
        walk_two(&b, 0, 1, cases[i].bad, (const unsigned[2]){ 0, 0 });
        firn_forecast_row(&row, &loss);
        assert_true(b.both > 0 && b.both < exp(loss.ln_row));
        near(exp(firn_forecast_beside_both(&row, loss.ln_row)), b.both, 1e-9);
    }
    (void)state;
}

/* Any of n independent rows; rows that always go together; rows of which nobody knows whether they do. */
static void any_of_rows_side_by_side(void **state)
{
    const double q = 0.03;

    near(exp(firn_forecast_beside_any(log(q), 2 * log(q), 10)), 1 - pow(1 - q, 10), 1e-12);
    near(exp(firn_forecast_beside_any(log(q), log(q), 10)), q, 1e-12);
    assert_true(firn_forecast_beside_any(log(q), -INFINITY, 10) > firn_forecast_beside_any(log(q), 2 * log(q), 10));
    assert_true(firn_forecast_beside_any(-INFINITY, -INFINITY, 10) == -INFINITY);
    assert_true(firn_forecast_beside_any(0, 0, 10) == 0);
    near(exp(firn_forecast_beside_any(log(q), 2 * log(q), 1)), q, 1e-12);
    (void)state;
}

/* Runs of one block, or rows whose blocks lie far apart, are as good as single losses: GSL's binomial tail again. */
static void rows_without_runs_are_binomial(void **state)
{
    struct firn_forecast_row row = { 224, 32, 128, log(0.02), log(0.05), 1 };
    struct firn_forecast_row_loss loss, far;
    double either = 0.05 + 0.02 * 0.95;

    firn_forecast_row(&row, &loss);
    near(exp(loss.ln_row), gsl_cdf_binomial_Q(32, either, 256), 1e-8);
    /* a data block lost, and at least 32 of the 255 others */
    near(exp(loss.ln_block), either * gsl_cdf_binomial_Q(31, either, 255), 1e-8);
    row.run_blocks = 2;
    row.apart = 2000;
    firn_forecast_row(&row, &far);
    near(exp(far.ln_row), exp(loss.ln_row), 1e-8);
    near(exp(far.ln_block), exp(loss.ln_block), 1e-8);
    (void)state;
}

/*
 * E. N. Gilbert's chain with p = 0.01, r = 0.1: share of bad blocks p / (p + r) = 0.0909091, mean run 1 / r; with
 * p = 1e-6, r = 0.01: 9.9990e-5. Recomputed. A row of one block and no reserve shows the share.
 */
static void share_of_bad_blocks(void **state)
{
    struct firn_forecast_row row = { 1, 0, 1, -INFINITY, log(0.01 / 0.11), 10 };
    struct firn_forecast_row_loss loss;

    firn_forecast_row(&row, &loss);
    near(exp(loss.ln_row), 0.0909091, 1e-6);
    row.ln_bad = log(1e-6 / (1e-6 + 0.01));
    row.run_blocks = 100;
    firn_forecast_row(&row, &loss);
    near(exp(loss.ln_block), 9.9990e-5, 1e-5);
    (void)state;
}

/* Tiny chances keep their digits: five single losses out of 10 in a chain that is never bad. */
static void rows_hold_to_1e300_and_beyond(void **state)
{
    struct firn_forecast_row row = { 6, 4, 3, -80 * M_LN10, -120 * M_LN10, 4 };
    struct firn_forecast_row_loss loss;

    firn_forecast_row(&row, &loss);
    /* a run that covers the ten blocks: 1e-120 for the first, then it stays bad for 3 blocks at a time */
    assert_true(loss.ln_row > -140 * M_LN10 && loss.ln_row < -119 * M_LN10);
    row.ln_bad = -2000 * M_LN10;
    firn_forecast_row(&row, &loss);
    near(loss.ln_row, log(252) - 400 * M_LN10, 1e-12);      /* C(10,5) = 252 */
    (void)state;
}

/* --- years --- */

static const struct firn_sheet_geometry usual = { .k = 224, .m = 32, .depth = 128 };

static struct firn_forecast_plan plan_of(uint64_t bytes, unsigned copies, double years, double interval)
{
    return (struct firn_forecast_plan){ .bytes = bytes, .geometry = usual, .copies = copies, .years = years,
                                        .interval = interval };
}

static void run(const struct firn_forecast_medium *medium, const struct firn_forecast_plan *plan,
                struct firn_forecast_result *result)
{
    assert_int_equal(firn_forecast_run(medium, plan, result), FIRN_OK);
}

/* The default sheet: 224 x 128 data blocks of 3968 bytes, 256 x 128 blocks in all. */
static void layout_is_that_of_the_format(void **state)
{
    struct firn_forecast_medium medium = { .run_bytes = 512 };
    struct firn_forecast_plan plan = plan_of(UINT64_C(224) * 128 * 3968 * 2, 1, 1, 1);
    struct firn_forecast_result r;

    run(&medium, &plan, &r);
    assert_int_equal(r.data_blocks, 2 * 28672);
    assert_int_equal(r.blocks, 2 * 32768);
    assert_int_equal(r.rows, 256);
    assert_int_equal(r.container_bytes, (2 * 32768 + 1) * 4096);
    for (unsigned cause = 0; cause < FIRN_FORECAST_CAUSES; cause++)
        assert_true(r.ln_lost[cause] == -INFINITY && r.lost_bytes[cause] == 0);
    plan.bytes += UINT64_C(1000) * 3968 - 7;
    run(&medium, &plan, &r);
    assert_int_equal(r.data_blocks, 2 * 28672 + 1000);
    assert_int_equal(r.blocks, 2 * 32768 + 1160);            /* format-spec/sheet.md: t = 1000 has 160 reserve blocks */
    assert_int_equal(r.rows, 256 + 5);
    assert_int_equal(r.last_sheet.k, 200);
    /* rows of a short last sheet are told apart too: all there are, when there is no other sheet */
    assert_true(r.ln_lost[FIRN_FORECAST_LAST_SHEET] == -INFINITY);
    medium.flips = 1e-4;
    run(&medium, &plan, &r);
    assert_true(r.ln_lost[FIRN_FORECAST_LAST_SHEET] > -INFINITY);
    assert_true(r.ln_lost[FIRN_FORECAST_LAST_SHEET] < r.ln_lost[FIRN_FORECAST_ROWS]);
    plan.bytes = UINT64_C(1000) * 3968;
    run(&medium, &plan, &r);
    near(r.ln_lost[FIRN_FORECAST_LAST_SHEET], r.ln_lost[FIRN_FORECAST_ROWS], 1e-12);
    (void)state;
}

/* A medium lost at rate l: for one copy 1 - e^(-l Y), for c copies 1 - (1 - (1 - e^(-l T))^c)^(Y/T). */
static void lost_media(void **state)
{
    struct firn_forecast_medium medium = { .loss = 0.03, .run_bytes = 512 };
    struct firn_forecast_plan plan = plan_of(1000000000, 1, 10, 1);
    struct firn_forecast_result r;
    double one = -expm1(-0.03), till;

    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_MEDIUM]), -expm1(-0.3), 1e-12);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]), -expm1(-0.3), 1e-12);
    near(r.lost_bytes[FIRN_FORECAST_ANY], 1e9 * -expm1(-0.3), 1e-12);
    near(r.media, one, 1e-12);
    plan.copies = 3;
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]), 1 - pow(1 - one * one * one, 10), 1e-9);
    plan.interval = 0.3;      /* 33 whole intervals and one of 0.1 */
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]),
         1 - pow(1 - pow(-expm1(-0.009), 3), 33) * (1 - pow(-expm1(-0.003), 3)), 1e-6);
    plan.interval = INFINITY;
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]), pow(-expm1(-0.3), 3), 1e-12);
    /* all three within 1.5 years, but not all of them in the last half year: those belong to the next interval */
    plan.interval = 1;
    plan.replace = 0.5;
    till = -expm1(-0.045);
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]), 1 - pow(1 - (pow(till, 3) - pow(till - one, 3)), 10), 1e-9);
    plan.replace = 0;
    plan.correlation = 1;     /* copies that share every fate are one copy */
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]), -expm1(-0.3), 1e-12);
    plan.correlation = 0.1;
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ANY]), 1 - pow(1 - 0.1 * one - 0.9 * one * one * one, 10), 1e-9);
    (void)state;
}

/* Flips at a rate where a row of 256 has a fair chance: GSL for the lanes, the row and the rows. */
static void flips_through_lanes_and_rows(void **state)
{
    struct firn_forecast_medium medium = { .flips = 1e-4, .run_bytes = 512 };
    struct firn_forecast_plan plan = plan_of(UINT64_C(224) * 128 * 3968, 1, 2, 1);
    double lane = gsl_cdf_binomial_Q(1, -expm1(-1e-4), 512), block = 1 - pow(1 - lane, 64);
    double row = gsl_cdf_binomial_Q(32, block, 256), sheet = 1 - pow(1 - row, 128);
    struct firn_forecast_result r;

    run(&medium, &plan, &r);
    near(r.beyond_lanes, 32768 * block, 1e-9);
    near(exp(r.ln_lost[FIRN_FORECAST_ROWS]), 1 - pow(1 - sheet, 2), 1e-6);
    near(exp(r.ln_lost[FIRN_FORECAST_FLIPS]), exp(r.ln_lost[FIRN_FORECAST_ROWS]), 1e-12);
    assert_true(r.ln_lost[FIRN_FORECAST_RUNS] == -INFINITY && r.ln_lost[FIRN_FORECAST_READING] == -INFINITY);
    plan.copies = 2;
    run(&medium, &plan, &r);
    near(exp(r.ln_lost[FIRN_FORECAST_ROWS]), 1 - pow(1 - row * row, 256), 1e-6);
    (void)state;
}

static bool falls(double before, double after)
{
    return after <= before + 1e-12;
}

/* More reserve, more copies, shorter intervals never make it worse; more correlation, more years never better. */
static void directions(void **state)
{
    struct firn_forecast_medium medium = { .flips = 2e-5, .runs = 40, .run_bytes = 200000, .loss = 0.05,
                                           .read_errors = 1e-10 };
    struct firn_forecast_plan plan = plan_of(300000000, 2, 10, 2), other;
    struct firn_forecast_result r, s;
    double before = 0;

    for (unsigned i = 0; i < 5; i++) {
        static const double reserves[] = { 0, 2, 5, 14.3, 50 };

        assert_int_equal(firn_sheet_geometry_for(reserves[i], 134217728, &plan.geometry), FIRN_OK);
        run(&medium, &plan, &r);
        assert_true(falls(before, r.ln_lost[FIRN_FORECAST_ANY]));
        before = r.ln_lost[FIRN_FORECAST_ANY];
        assert_true(falls(r.ln_lost[FIRN_FORECAST_ANY], r.ln_lost[FIRN_FORECAST_ROWS]));
        assert_true(falls(r.ln_lost[FIRN_FORECAST_ROWS], r.ln_lost[FIRN_FORECAST_RUNS]));
        assert_true(r.lost_bytes[FIRN_FORECAST_ANY] <= 300000000.0);
    }
    plan.geometry = (struct firn_sheet_geometry){ 160, 8, 195 };
    run(&medium, &plan, &r);
    other = plan, other.copies = 3;
    run(&medium, &other, &s);
    assert_true(falls(r.ln_lost[FIRN_FORECAST_ANY], s.ln_lost[FIRN_FORECAST_ANY]));
    other = plan, other.interval = 1;
    run(&medium, &other, &s);
    assert_true(falls(r.ln_lost[FIRN_FORECAST_ANY], s.ln_lost[FIRN_FORECAST_ANY]));
    other = plan, other.correlation = 0.2;
    run(&medium, &other, &s);
    assert_true(falls(s.ln_lost[FIRN_FORECAST_ANY], r.ln_lost[FIRN_FORECAST_ANY]));
    other = plan, other.years = 12;
    run(&medium, &other, &s);
    assert_true(falls(s.ln_lost[FIRN_FORECAST_ANY], r.ln_lost[FIRN_FORECAST_ANY]));
    (void)state;
}

/* From nothing ever happens to everything always does: no figure is nonsense, and none contradicts another. */
static void figures_stay_in_bounds(void **state)
{
    struct random random = random_start("figures_stay_in_bounds");
    unsigned certain = 0, possible = 0;

    for (unsigned round = 0; round < 400; round++) {
        struct firn_forecast_medium medium = {
            .flips = pow(10, random_below(&random, 28) - 20.0), .runs = pow(10, random_below(&random, 26) - 10.0),
            .run_bytes = 512 * pow(10, random_below(&random, 9)), .loss = pow(10, random_below(&random, 18) - 12.0),
            .read_errors = pow(10, -(double)random_below(&random, 20))
        };
        struct firn_forecast_plan plan = plan_of(UINT64_C(1) << random_below(&random, 62), 1 + random_below(&random, 4),
                                                 pow(10, random_below(&random, 5) - 1.0),
                                                 pow(10, random_below(&random, 5) - 2.0));
        struct firn_forecast_result r;

        plan.correlation = random_below(&random, 3) / 2.0;
        plan.replace = random_below(&random, 2) / 10.0;
        if (round % 5 == 0)
            medium.flips = medium.read_errors = 0;
        if (round % 7 == 0)
            medium.runs = medium.loss = 0;
        assert_int_equal(firn_sheet_geometry_for(random_below(&random, 3) * 7.0, 1 << 22, &plan.geometry), FIRN_OK);
        run(&medium, &plan, &r);
        for (unsigned cause = 0; cause < FIRN_FORECAST_CAUSES; cause++) {
            assert_true(r.ln_lost[cause] <= 0);
            assert_true(r.ln_lost[cause] <= r.ln_lost[FIRN_FORECAST_ANY] + 1e-9);
            assert_true(r.lost_bytes[cause] >= 0 && r.lost_bytes[cause] <= (double)plan.bytes * (1 + 1e-9));
        }
        assert_true(r.ln_lost[FIRN_FORECAST_FLIPS] <= r.ln_lost[FIRN_FORECAST_ROWS] + 1e-9);
        assert_true(r.mended_blocks >= 0 && r.beyond_lanes >= 0 && r.bad_blocks >= 0);
        assert_true(r.media >= 0 && r.media <= 1 && r.reading_error >= 0 && r.reading_error <= 1);
        assert_true(r.waiting >= 0 && r.waiting <= 1 && r.waiting_irregular >= 0 && r.waiting_irregular <= 1);
        assert_true(r.two_copies_years >= 0);
        certain += r.ln_lost[FIRN_FORECAST_ANY] > -1e-9;
        possible += r.ln_lost[FIRN_FORECAST_ANY] < -1;
    }
    assert_true(certain > 20 && possible > 20);
    (void)state;
}

static void refuses_what_means_nothing(void **state)
{
    const struct firn_forecast_medium good = { .run_bytes = 512 };
    const struct firn_forecast_plan fine = plan_of(1000, 1, 1, 1);
    struct firn_forecast_medium medium;
    struct firn_forecast_plan plan;
    struct firn_forecast_result r;

    run(&good, &fine, &r);
    medium = good, medium.flips = -1;
    assert_int_equal(firn_forecast_run(&medium, &fine, &r), FIRN_BAD_ARGUMENT);
    medium = good, medium.run_bytes = 511;
    assert_int_equal(firn_forecast_run(&medium, &fine, &r), FIRN_BAD_ARGUMENT);
    medium = good, medium.read_errors = 1.5;
    assert_int_equal(firn_forecast_run(&medium, &fine, &r), FIRN_BAD_ARGUMENT);
    medium = good, medium.loss = NAN;
    assert_int_equal(firn_forecast_run(&medium, &fine, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.bytes = 0;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.copies = 0;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.copies = FIRN_FORECAST_COPIES_MAX + 1;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.years = 0;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.interval = NAN;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.correlation = 1.1;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    plan = fine, plan.geometry.m = 3;
    assert_int_equal(firn_forecast_run(&good, &plan, &r), FIRN_BAD_ARGUMENT);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(tails_agree_with_gsl),
        cmocka_unit_test(far_tails_agree_with_sums_of_gsl_terms),
        cmocka_unit_test(tails_hold_to_1e300_and_beyond),
        cmocka_unit_test(known_tails),
        cmocka_unit_test(reading_errors),
        cmocka_unit_test(scrub_arithmetic),
        cmocka_unit_test(baker_two_copies),
        cmocka_unit_test(rows_agree_with_every_path_summed),
        cmocka_unit_test(rows_side_by_side_agree_with_every_path_summed),
        cmocka_unit_test(any_of_rows_side_by_side),
        cmocka_unit_test(rows_without_runs_are_binomial),
        cmocka_unit_test(share_of_bad_blocks),
        cmocka_unit_test(rows_hold_to_1e300_and_beyond),
        cmocka_unit_test(layout_is_that_of_the_format),
        cmocka_unit_test(lost_media),
        cmocka_unit_test(flips_through_lanes_and_rows),
        cmocka_unit_test(directions),
        cmocka_unit_test(figures_stay_in_bounds),
        cmocka_unit_test(refuses_what_means_nothing),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
