/* examples/api/check_blocks.c - says of every block of a container what it is: over the public headers alone */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/block.h>

#include <inttypes.h>
#include <stdio.h>

int main(int argc, char **argv)
{
    static const char *const words[] = {
        [FIRN_BLOCK_SOUND] = "sound", [FIRN_BLOCK_MENDED] = "mended", [FIRN_BLOCK_GONE] = "gone",
        [FIRN_BLOCK_FOREIGN] = "foreign"
    };
    uint8_t block[FIRN_BLOCK_BYTES];
    uint64_t counts[4] = { 0 };
    FILE *file = argc == 2 ? fopen(argv[1], "rb") : NULL;

    if (file == NULL || fseek(file, FIRN_BLOCK_BYTES, SEEK_SET) != 0) {      /* the title page is before block 0 */
        fputs("usage: check_blocks CONTAINER\n", stderr);
        return 64;
    }
    while (fread(block, sizeof block, 1, file) == 1) {
        struct firn_block_tag tag;
        enum firn_block_state state = firn_block_open(block, true, &tag);

        counts[state]++;
        if (state == FIRN_BLOCK_MENDED)
            printf("block %" PRIu64 ": mended in memory\n", tag.number);
    }
    fclose(file);
    for (int i = 0; i < 4; i++)
        printf("%-8s %" PRIu64 "\n", words[i], counts[i]);
    return counts[FIRN_BLOCK_GONE] > 0 ? 2 : counts[FIRN_BLOCK_MENDED] > 0 ? 1 : 0;
}
