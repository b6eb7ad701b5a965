/* examples/api/check_container.c - checks every block of a container, writes nothing, tells where damage lies */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/scrub.h>

#include <inttypes.h>
#include <stdio.h>

static void tell(void *self, uint64_t block, enum firn_scrub_found what)
{
    static const char *const words[] = {
        [FIRN_SCRUB_MENDED] = "can be mended from itself", [FIRN_SCRUB_REBUILT] = "can be rebuilt from the reserve",
        [FIRN_SCRUB_LOST] = "is lost"
    };

    (void)self;
    printf("block %" PRIu64 ", byte %" PRIu64 " of the file: %s\n", block, (block + 1) * 4096, words[what]);
}

int main(int argc, char **argv)
{
    struct firn_scrub_options options = {
        .memory = firn_memory_system(), .threads = 2, .report_only = true, .found = tell
    };
    struct firn_scrub_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status;
    bool title_hurt;

    if (argc != 2) {
        fputs("usage: check_container CONTAINER\n", stderr);
        return 64;
    }
    options.path = argv[1];
    status = firn_scrub(&options, &report, &fault);
    if (status != FIRN_OK) {
        fprintf(stderr, "check_container: %s: %s %s\n", argv[1], firn_status_text(status), fault.what);
        return status == FIRN_NO_INPUT ? 66 : status == FIRN_NOT_CONTAINER ? 65 : 74;
    }
    title_hurt = report.title == FIRN_SCRUB_TITLE_DAMAGED;
    if (title_hurt)
        puts("the title page can be healed from its protected copy");
    printf("%" PRIu64 " of %" PRIu64 " blocks checked: %" PRIu64 " to mend, %" PRIu64 " to rebuild, %" PRIu64
           " lost\n", report.checked, report.blocks, report.mended, report.rebuilt, report.lost);
    if (!report.end_known)
        puts("the end of the container is missing: there may have been more");
    if (report.lost > 0 || !report.end_known)
        return 2;      /* as the program firn has it: bytes are lost; damage, but all of it is safe; intact */
    return report.mended + report.rebuilt > 0 || title_hurt ? 1 : 0;
}
