/* desk/interrupt.c - being asked to stop, politely */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/interrupt.h"

#include <signal.h>
#include <stddef.h>

static volatile sig_atomic_t asked;      /* the signal's number: a handler has nowhere else to put it */

static void note(int signal_number)
{
    asked = signal_number;
}

void firn_interrupt_listen(void)
{
    const int polite[] = { SIGINT, SIGTERM, SIGHUP };
    struct sigaction action = { .sa_handler = note };

    sigemptyset(&action.sa_mask);
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
