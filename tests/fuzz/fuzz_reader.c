/* tests/fuzz/fuzz_reader.c - any bytes for the carried reader: a container file, a coded segment, a catalogue entry */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <stdio.h>
#undef stderr
#define stderr stdout /* nobody reads what it says of millions of inputs */
int carried_main(int count, char **words);
#define main carried_main
#include "../../format-spec/reader.c"
#undef main

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static void as_container(const uint8_t *data, size_t size)
{
    static uint8_t copy[1 << 20];
    static struct container c;
    struct task task = { .mode = 'c' };
    FILE *file;

    if (size == 0 || size > sizeof copy)
        return;
    memcpy(copy, data, size);
    file = fmemopen(copy, size, "rb");
    if (file == NULL)
        abort();
    largest_holes = 1 << 20;
    if (open_container(&c, file))
        (void)run(&c, &task);
    free(c.refs);
    free(c.body);
    free(c.sums_body);
    fclose(file);
}

/* Two bytes tell how long the segment is said to be; it may be as long as segments get. */
static void as_segment(const uint8_t *data, size_t size)
{
    static byte raw[1 << 20];
    size_t length = size < 3 ? 0 : (size_t)get(data, 2) * 16 % sizeof raw + data[2] % 16 + 1;

    if (size >= 3 && length <= sizeof raw)
        (void)decode_segment(data + 3, size - 3, raw, length);
}

static void as_entry(const uint8_t *data, size_t size)
{
    struct item item = { 0 };
    uint8_t *copy = malloc(size + 1); /* digits are put back into it, and a zero stands behind it */

    if (copy == NULL)
        abort();
    memcpy(copy, data, size);
    copy[size] = 0;
    if (read_entry(copy, size, &item) > size)
        abort();
    if (size >= 512) {
        item.pax = copy;
        item.pax_bytes = (uint32_t)size;
        if (read_pax(&item)) {
            list_item(&item);
            (void)leads_down(item.path);
        }
    }
    free(copy);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static FILE *silent;

    if (silent == NULL)
        silent = freopen("/dev/null", "w", stdout);
    if (silent == NULL)
        abort();
    as_container(data, size);
    as_segment(data, size);
    as_entry(data, size);
    return 0;
}
