/* desk/opening_store.c - a store for whatever a command line names: file, device, pipe, standard input */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/opening_store.h"

#include "desk/interrupt.h"
#include "desk/progress.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

/* Said before it is done: the copy needs as much space as what comes through the pipe, and may take a while. */
static void tell_place(struct firn_view *view, const char *path, int descriptor)
{
    const char *folder = getenv("TMPDIR");
    char words[512];
    struct firn_text text;
    struct stat facts;

    if (fstat(descriptor, &facts) == 0 && S_ISREG(facts.st_mode))
        return;
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "cannot be searched; copied to a temporary file in %s first (TMPDIR tells where)",
                  folder != NULL && folder[0] != '\0' ? folder : "/tmp");
    firn_view_note(view, "copied", strcmp(path, "-") == 0 ? "standard input" : path, words);
}

static void step(void *self, uint64_t at, uint64_t bytes)
{
    (void)bytes;
    firn_progress_step(self, 0, at);
}

static enum firn_status spool(struct firn_view *view, const char *path, int descriptor,
                              const struct firn_memory *memory, struct firn_store *store, struct firn_fault *fault)
{
    struct firn_progress progress;
    struct firn_store_watch watch = { .self = &progress, .progress = step, .stop = firn_interrupt_asked };
    enum firn_status status;

    tell_place(view, path, descriptor);
    firn_progress_start(&progress, "copying", 0, view->quiet || view->json);
    status = firn_store_spool(descriptor, &watch, memory, store, fault);
    firn_progress_wipe(&progress);
    return status;
}

enum firn_status firn_opening_store(struct firn_view *view, const char *path, const struct firn_memory *memory,
                                    struct firn_store *store, struct firn_fault *fault)
{
    enum firn_status status;
    struct stat facts;
    int descriptor;

    if (strcmp(path, "-") == 0)
        return spool(view, path, STDIN_FILENO, memory, store, fault);
    if (stat(path, &facts) != 0 || !S_ISFIFO(facts.st_mode))
        return firn_store_open(path, FIRN_STORE_READ, memory, store, fault);
    descriptor = open(path, O_RDONLY | O_CLOEXEC | O_NOCTTY);
    if (descriptor < 0) {
        fault->os_error = errno;
        return FIRN_NO_INPUT;
    }
    status = spool(view, path, descriptor, memory, store, fault);
    close(descriptor);
    return status;
}
