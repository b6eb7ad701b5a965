/*
 * firn/forecast.h - how likely a container is to lose something over the years, and how much
 *
 * Room: care. Pure calculation: no files, clock or allocation. Probabilities are natural logarithms ("ln_"), so that
 * 1e-300 and less keep their digits; 0 is -INFINITY.
 *
 * The model. At each scrub a copy is as good as new, or is made so from another copy; between scrubs damage gathers.
 * - Bits go wrong each for itself; a block is beyond its lanes when one of 64 lanes of 512 bits has two of them.
 * - Unreadable runs make a two-state Markov chain along the blocks (Gilbert 1960): good and bad stretches of
 *   geometric length. In good stretches a block can still be lost to flips or to a read error (Elliott 1963).
 * - A row's blocks lie D apart on that chain; the row is lost when more than m of its k + m blocks are. Without a
 *   reserve every block stands for itself.
 * - A medium is lost as a whole at a constant rate.
 * - With several copies something is lost when no copy has it: each stretch needs one copy whose row is sound. The
 *   first copy fails between two scrubs, the others before it has been made anew.
 * Correlation c: with probability c the copies share one fate, else each has its own.
 *
 * What is not in it, and makes things better than told: mending of lanes with two wrong bits, decoding of rows beyond
 * m byte by byte, collating row by row out of blocks of several copies, rows that lack a data block. Rows that one run
 * takes together are followed two by two, which tells a little too much; as if each for itself below 1e-40. What makes
 * them worse: ageing (rates are constant), mistakes, fire, theft, a firm that closes, faults of programs. So a very
 * small figure says only that this cause is not what will lose the collection.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_FORECAST_H
#define FIRN_FORECAST_H

#include "firn/sheet.h"

#include <stddef.h>

/* --- probabilities --- */

/*
 * ln P(X > more_than) for X binomial: trials times probability exp(ln_p), ln_p <= 0. Exact but for rounding: of the
 * probability, a relative 1e-11 for the 512 trials of a lane, 1e-8 for a million.
 */
FIRN_API double firn_forecast_tail(uint64_t trials, uint64_t more_than, double ln_p);

/* What becomes of the blocks of one row. */
struct firn_forecast_row {
    unsigned k, m;
    unsigned apart;          /* blocks of a row lie so far apart in the container: D */
    double ln_alone;         /* ln P(a block outside unreadable runs is lost) */
    double ln_bad;           /* ln P(a block lies in an unreadable run) */
    double run_blocks;       /* mean length of a run, >= 1 */
};

struct firn_forecast_row_loss {
    double ln_row;           /* ln P(more than m blocks of the row are lost) */
    double ln_block;         /* ln P(a data block is lost and its row cannot bring it back) */
};

FIRN_API void firn_forecast_row(const struct firn_forecast_row *row, struct firn_forecast_row_loss *loss);

/* P(at least one error) in reading so many bytes, for a datasheet's "errors per bits read". */
FIRN_API double firn_forecast_read_error(double bytes, double errors_per_bit);

/*
 * The share of things that are bad at a random moment, when each goes bad at a constant rate and is mended at scrubs.
 * load: rate times interval. regular: scrubs at fixed intervals, 1 - (1 - e^-load) / load; otherwise at random
 * (exponential intervals with that mean), load / (1 + load). Renewal theory.
 */
FIRN_API double firn_forecast_waiting(double load, bool regular);

/*
 * The mean time to data loss of two copies after M. Baker et al., "A Fresh Look at the Reliability of Long-term Digital
 * Storage", EuroSys 2006: mean times to a visible and to a latent fault, to mend either, and to notice a latent one,
 * all in one unit; alpha <= 1 for correlation. A rate of never is INFINITY. latent_only: their short form, which looks
 * at two latent faults only.
 */
struct firn_forecast_two_copies {
    double visible, latent, mend_visible, mend_latent, notice_latent, alpha;
};
FIRN_API double firn_forecast_two_copies(const struct firn_forecast_two_copies *copies, bool latent_only);

/* --- media --- */

/* Rates are per year. */
struct firn_forecast_medium {
    double flips;            /* of one bit */
    double runs;             /* unreadable runs on a medium; all are taken to strike the container */
    double run_bytes;        /* mean length of one, >= 1 */
    double loss;             /* of the whole medium */
    double read_errors;      /* unreadable sectors per bit read, at every reading */
};

enum { FIRN_FORECAST_FIGURES = 5, FIRN_FORECAST_NAME_ROOM = 40, FIRN_FORECAST_WORDS_ROOM = 240 };

/* In the order of struct firn_forecast_medium: "flips", "runs", "run-length", "loss", "read-errors". */
FIRN_API const char *firn_forecast_figure_name(unsigned figure);
/* Where the figure stands in a medium. */
FIRN_API double *firn_forecast_figure(struct firn_forecast_medium *medium, unsigned figure);
/* Whether a medium can have this value there: a rate >= 0 and finite, a length of 512 bytes or more. */
FIRN_API bool firn_forecast_figure_valid(unsigned figure, double value);

struct firn_forecast_profile {
    char name[FIRN_FORECAST_NAME_ROOM];
    char about[FIRN_FORECAST_WORDS_ROOM];
    struct firn_forecast_medium medium;
    bool given[FIRN_FORECAST_FIGURES];
    bool assumed[FIRN_FORECAST_FIGURES];                                /* its source says that nobody published it */
    char sources[FIRN_FORECAST_FIGURES][FIRN_FORECAST_WORDS_ROOM];      /* "" where the figure is not given */
};

/*
 * Media profiles as plain text, UTF-8. Empty lines and lines that begin with # are skipped. A profile begins with
 *   medium NAME
 * and has lines "about WORDS" and "FIGURE VALUE SOURCE": each figure says in words where it comes from; a source that
 * begins with "assumed" says that it was not published. run-length takes a size such as 64KiB. What is not given is 0.
 */
struct firn_forecast_media {
    const char *text;        /* lent */
    size_t bytes, at;
    unsigned line;
};

FIRN_API void firn_forecast_media_start(struct firn_forecast_media *media, const char *text, size_t bytes);

/* FIRN_OK, FIRN_END, or FIRN_BAD_DATA: fault->what says which line and what is wrong with it. */
FIRN_API enum firn_status firn_forecast_media_next(struct firn_forecast_media *media,
                                                   struct firn_forecast_profile *profile, struct firn_fault *fault);

/* --- the forecast --- */

enum { FIRN_FORECAST_COPIES_MAX = 64 };

struct firn_forecast_plan {
    uint64_t bytes;                            /* coded content, catalogue and all: what fills data blocks; > 0 */
    struct firn_sheet_geometry geometry;
    unsigned copies;                           /* 1 .. FIRN_FORECAST_COPIES_MAX, each on a medium of its own */
    double years;                              /* > 0 */
    double interval;                           /* years between scrubs, > 0; more than years: never */
    double replace;                            /* years until a bad copy is made anew from another, >= 0 */
    double correlation;                        /* 0 .. 1 */
};

enum firn_forecast_cause {
    FIRN_FORECAST_FLIPS,         /* more than m blocks of a row beyond their lanes */
    FIRN_FORECAST_RUNS,          /* more than m in unreadable runs */
    FIRN_FORECAST_READING,       /* more than m not read for read errors */
    FIRN_FORECAST_ROWS,          /* more than m for all of these together */
    FIRN_FORECAST_LAST_SHEET,    /* of these, rows of a short last sheet: its few rows lie close, so a run takes them */
    FIRN_FORECAST_MEDIUM,        /* every copy's medium lost */
    FIRN_FORECAST_ANY,
    FIRN_FORECAST_CAUSES
};

struct firn_forecast_result {
    uint64_t data_blocks, blocks, rows;               /* of one copy */
    struct firn_sheet_shape last_sheet;
    uint64_t container_bytes;                         /* of one copy */
    double ln_lost[FIRN_FORECAST_CAUSES];             /* ln P(anything is lost within the years) */
    double lost_bytes[FIRN_FORECAST_CAUSES];          /* expected; a lost block takes its segments with it */
    /* per year and copy, before any repair: what a scrub is expected to find */
    double mended_blocks, beyond_lanes, bad_blocks, media;
    double reading_error;                             /* P(at least one read error) in reading one copy once */
    double waiting;                                   /* share of blocks with anything wrong at a random moment */
    double waiting_irregular;                         /* the same if scrubs came at random */
    double two_copies_years;                          /* Baker et al. with these figures; INFINITY: never */
};

/* FIRN_OK or FIRN_BAD_ARGUMENT. */
FIRN_API enum firn_status firn_forecast_run(const struct firn_forecast_medium *medium,
                                            const struct firn_forecast_plan *plan, struct firn_forecast_result *result);

/* --- choosing --- */

enum { FIRN_FORECAST_CHOICES = 10 };

struct firn_forecast_cell {
    double ln_lost;          /* ln P(anything is lost) */
    double ln_rows;          /* of it, beyond m blocks of a row while a medium is left */
    double cost;             /* a year, for each byte of content: copies, their size, and how often they are read */
    bool meets;              /* ln_lost is at most the target */
};

/*
 * Reserves beside intervals. What is asked for stands in the first fields; the rest is filled in. Keeping a byte for a
 * year costs `keep`, checking it once `check`.
 */
struct firn_forecast_table {
    unsigned reserve_count, interval_count;                     /* 1 .. FIRN_FORECAST_CHOICES */
    struct firn_sheet_geometry geometries[FIRN_FORECAST_CHOICES];
    double intervals[FIRN_FORECAST_CHOICES];                    /* years; INFINITY: never */
    double ln_target;                                           /* -INFINITY: none */
    double keep, check;                                         /* >= 0 */

    struct firn_forecast_cell cells[FIRN_FORECAST_CHOICES][FIRN_FORECAST_CHOICES];      /* reserve, interval */
    double ln_medium[FIRN_FORECAST_CHOICES];                    /* by interval: every copy's medium lost */
    bool found;                                                 /* some choice meets the target */
    unsigned best_reserve, best_interval;                       /* the cheapest that does; the safer of two as cheap */
};

/* plan: everything but geometry and interval. FIRN_OK or FIRN_BAD_ARGUMENT. */
FIRN_API enum firn_status firn_forecast_table_fill(const struct firn_forecast_medium *medium,
                                                   const struct firn_forecast_plan *plan,
                                                   struct firn_forecast_table *table);

#endif
