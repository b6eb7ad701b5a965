/* desk/interrupt.c - being asked to stop, politely */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/interrupt.h"

#include <errno.h>
#include <signal.h>
#include <stddef.h>
#include <time.h>

enum { PATIENCE_SECONDS = 2 };

static volatile sig_atomic_t asked;      /* the signal's number: a handler has nowhere else to put it */
static time_t asked_at;                  /* only handlers look at it, and they do not interrupt each other */

/*
 * Whoever asks again has waited long enough: what is half-written has no name yet, or a journal beside it. The same
 * signal sent twice at once, as terminals and job control do, is one request.
 */
static void note(int signal_number)
{
    struct timespec now = { 0, 0 };
    int error = errno;

    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    if (asked == 0) {
        asked = signal_number;
        asked_at = now.tv_sec;
    } else if (now.tv_sec - asked_at >= PATIENCE_SECONDS) {
        signal(signal_number, SIG_DFL);
        raise(signal_number);
    }
    errno = error;
}

void firn_interrupt_listen(void)
{
    const int polite[] = { SIGINT, SIGTERM, SIGHUP };
    struct sigaction action = { .sa_handler = note };

    sigemptyset(&action.sa_mask);
    for (size_t i = 0; i < sizeof polite / sizeof polite[0]; i++)
        sigaddset(&action.sa_mask, polite[i]);
    for (size_t i = 0; i < sizeof polite / sizeof polite[0]; i++) {
        struct sigaction before;

        /* a shell that starts us in the background may have set SIGINT to be ignored; nohup does so with SIGHUP */
        if (sigaction(polite[i], NULL, &before) == 0 && before.sa_handler != SIG_IGN)
            sigaction(polite[i], &action, NULL);
    }
    signal(SIGPIPE, SIG_IGN);
    signal(SIGXFSZ, SIG_IGN);
}

bool firn_interrupt_asked(void *unused)
{
    (void)unused;
    return asked != 0;
}

void firn_interrupt_obey(void)
{
    if (asked == 0)
        return;
    signal(asked, SIG_DFL);
    raise(asked);
}
