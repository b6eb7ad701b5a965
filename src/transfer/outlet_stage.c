/* transfer/outlet_stage.c - things that are made beside their place */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* renameat2 */
#include "transfer/outlet_stage.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <stdio.h>
#include <unistd.h>

enum { ATTEMPTS = 1000 };      /* names left behind by killed runs of the same process number */

int firn_outlet_stage_make(struct firn_outlet_stage *stage, int folder, firn_outlet_stage_maker *make, void *self)
{
    int made = -1;

    stage->folder = folder;
    for (unsigned attempt = 0; attempt < ATTEMPTS; attempt++) {
        snprintf(stage->name, sizeof stage->name, ".firn-%ld-%" PRIu64, (long)getpid(), stage->counter++);
        made = make(self, folder, stage->name);
        if (made >= 0 || errno != EEXIST)
            break;
    }
    if (made < 0)
        stage->name[0] = '\0';
    return made;
}

/* Where the system has no renaming that spares what is there: a second name, then the first is taken away. */
static int settle_by_link(const struct firn_outlet_stage *stage, const char *name)
{
    if (linkat(stage->folder, stage->name, stage->folder, name, 0) != 0)
        return -1;
    return unlinkat(stage->folder, stage->name, 0);
}

int firn_outlet_stage_settle(struct firn_outlet_stage *stage, const char *name, bool replace)
{
    int result, error;

    if (replace) {
        result = renameat(stage->folder, stage->name, stage->folder, name);
    } else {
        result = renameat2(stage->folder, stage->name, stage->folder, name, RENAME_NOREPLACE);
        if (result != 0 && (errno == EINVAL || errno == ENOSYS))
            result = settle_by_link(stage, name);
    }
    error = result == 0 ? 0 : errno == EISDIR || errno == ENOTEMPTY ? EEXIST : errno;
    if (result == 0 && !replace)
        stage->name[0] = '\0';
    firn_outlet_stage_drop(stage);      /* after success too: to rename one name of a file to another does nothing */
    return error;
}

void firn_outlet_stage_drop(struct firn_outlet_stage *stage)
{
    if (stage->name[0] != '\0')
        (void)unlinkat(stage->folder, stage->name, 0);
    stage->name[0] = '\0';
}
