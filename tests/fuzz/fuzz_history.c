/* tests/fuzz/fuzz_history.c - a history file that is anything: what is taken from it keeps its promises */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/history.h"

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static char folder[] = "/tmp/firn-fuzz-history-XXXXXX", place[64];

static void need(bool fine)
{
    if (!fine)
        abort();
}

static struct firn_history *open_history(void)
{
    struct firn_history *history;
    struct firn_fault fault;

    need(firn_history_open(folder, place, firn_memory_system(), &history, &fault) == FIRN_OK);
    return history;
}

static void make_folder(void)
{
    int file;

    need(mkdtemp(folder) != NULL);
    (void)snprintf(place, sizeof place, "%s/x.firn", folder);
    file = open(place, O_WRONLY | O_CREAT | O_CLOEXEC, 0600);
    need(file >= 0 && close(file) == 0);
}

static void check_entries(const struct firn_history *history)
{
    struct firn_trend trend = firn_history_trend(history);

    need(trend.newest_chance >= 0 && trend.newest_chance <= 1);
    for (size_t i = 0; i < history->count; i++)
        need(history->entries[i].blocks > 0 && history->entries[i].reached <= history->entries[i].blocks);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const struct firn_history_entry fresh = { .began = 7, .at = 8, .blocks = 9, .reached = 9, .done = true };
    struct firn_history *history;
    struct firn_core core;
    struct firn_fault fault;
    int file;

    if (place[0] == '\0')
        make_folder();
    history = open_history();
    file = open(history->file, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0600);
    need(file >= 0 && write(file, data, size) == (ssize_t)size && close(file) == 0);
    firn_history_close(history);
    history = open_history();
    check_entries(history);
    if (size % 16 != 0) {      /* what is added is synced, which takes longer than all the rest */
        firn_history_close(history);
        return 0;
    }
    firn_core_start(&core, fresh.blocks);
    core.slices[3].lost = 4;
    need(firn_history_add(history, &fresh, &core, &fault) == FIRN_OK);
    firn_history_close(history);
    history = open_history();      /* whatever stood there before, what was added is the newest */
    need(history->count > 0 && history->entries[history->count - 1].began == 7 && history->core.slices[3].lost == 4);
    check_entries(history);
    firn_history_close(history);
    return 0;
}
