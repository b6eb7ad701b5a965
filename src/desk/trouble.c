/* desk/trouble.c - a status becomes one clear line and an exit status */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/trouble.h"

#include "desk/interrupt.h"

#include <errno.h>
#include <inttypes.h>
#include <string.h>

static const struct trouble {
    enum firn_status status;
    int exit;
    const char *kind, *what_to_do;
} troubles[] = {
    { FIRN_NO_MEMORY, FIRN_EXIT_OS, "no-memory", "free some, or use fewer threads" },
    { FIRN_BAD_ARGUMENT, FIRN_EXIT_USAGE, "usage", "see --help" },
    { FIRN_BAD_LENGTHS, FIRN_EXIT_BAD_DATA, "bad-data", "the file may be of another kind" },
    { FIRN_BAD_DATA, FIRN_EXIT_BAD_DATA, "bad-data", "check the source, or take another copy" },
    { FIRN_NOT_CONTAINER, FIRN_EXIT_BAD_DATA, "not-a-container",
      "check the name; if it should be one, take another copy" },
    { FIRN_FOREIGN_FORMAT, FIRN_EXIT_BAD_DATA, "foreign-format", "use a later version of firn" },
    { FIRN_OVER_LIMIT, FIRN_EXIT_BAD_DATA, "over-limit", "see the limits in format-spec" },
    { FIRN_NO_ROOM, FIRN_EXIT_SOFTWARE, "no-room", "please report this" },
    { FIRN_BEYOND_REPAIR, FIRN_EXIT_LOST, "beyond-repair", "take another copy" },
    { FIRN_LOST, FIRN_EXIT_LOST, "lost", "take another copy" },
    { FIRN_MISMATCH, FIRN_EXIT_BAD_DATA, "mismatch", "do not trust this; take another copy" },
    { FIRN_NO_INPUT, FIRN_EXIT_NO_INPUT, "no-input", "check the name and your rights" },
    { FIRN_EXISTS, FIRN_EXIT_CANNOT_CREATE, "exists", "choose another name, or allow it with --replace" },
    { FIRN_CANNOT_CREATE, FIRN_EXIT_CANNOT_CREATE, "cannot-create", "check the folder, its rights and its space" },
    { FIRN_IO, FIRN_EXIT_IO, "input-output", "check the medium and its space" },
    { FIRN_BUSY, FIRN_EXIT_TRY_AGAIN, "busy", "try again later" },
    { FIRN_CHANGED, FIRN_EXIT_TRY_AGAIN, "changed", "try again when it is at rest" },
    { FIRN_STOPPED, FIRN_EXIT_TRY_AGAIN, "stopped", "nothing was left half-written" },
    { FIRN_READ_ONLY, FIRN_EXIT_CANNOT_CREATE, "read-only", "make it writable, or only report with --report-only" },
};

static const struct trouble *find(enum firn_status status)
{
    for (size_t i = 0; i < sizeof troubles / sizeof troubles[0]; i++)
        if (troubles[i].status == status)
            return &troubles[i];
    return NULL;
}

int firn_trouble_exit(enum firn_status status)
{
    const struct trouble *trouble = find(status);

    return status == FIRN_OK ? FIRN_EXIT_SOUND : trouble == NULL ? FIRN_EXIT_SOFTWARE : trouble->exit;
}

int firn_trouble_tell(struct firn_view *view, const char *path, enum firn_status status, const struct firn_fault *fault)
{
    const char *what = fault != NULL ? fault->what : "", *advice;
    const struct trouble *trouble;
    char words[768];
    struct firn_text text;

    /* what fails since somebody wants us to stop, such as opening a pipe that nobody writes to, does not fail */
    if (fault != NULL && fault->os_error == EINTR && firn_interrupt_asked(NULL))
        status = FIRN_STOPPED;
    trouble = find(status);
    advice = trouble == NULL ? "please report this" : trouble->what_to_do;
    if (status == FIRN_NO_INPUT && fault != NULL && fault->os_error == ESPIPE)
        advice = "it is no file or device that can be searched; copy it to a file";
    if (status == FIRN_IO && fault != NULL && (fault->os_error == ENOSPC || fault->os_error == EDQUOT))
        advice = "make room and run it again";
    if (fault != NULL && fault->os_error == EMFILE)
        advice = "allow it more open files (ulimit -n)";
    firn_text_start(&text, words, sizeof words);
    if (path != NULL && what[0] != '\0' && strcmp(path, what) != 0)
        firn_text_add(&text, "%s: ", what);
    firn_text_add(&text, "%s", firn_status_text(status));
    if (fault != NULL && fault->os_error != 0 && status != FIRN_STOPPED)
        firn_text_add(&text, " (%s)", strerror(fault->os_error));
    if (fault != NULL && fault->at > 0)
        firn_text_add(&text, ", at %" PRIu64, fault->at);
    firn_text_add(&text, "; %s", advice);
    firn_view_finding(view, trouble == NULL ? "unknown" : trouble->kind, path != NULL ? path : what, words);
    return firn_trouble_exit(status);
}

int firn_trouble_usage(struct firn_view *view, const char *word, const char *what)
{
    char words[512];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s; see 'firn %s --help'", what, view->command);
    firn_view_finding(view, "usage", word, words);
    return FIRN_EXIT_USAGE;
}
