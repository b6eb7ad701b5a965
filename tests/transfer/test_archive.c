/*
 * tests/transfer/test_archive.c - archives taken in: every format, links of all kinds, and archives that are broken or
 * evil
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/box.h"
#include "transfer/tree.h"

#include "help/fault_memory.h"
#include "help/scratch.h"

#include <archive.h>
#include <archive_entry.h>

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <sys/xattr.h>
#include <unistd.h>

static void run(const char *command)
{
    if (system(command) != 0)
        fail_msg("%s", command);
}

/* Takes in what comes through a pipe on standard input. */
static enum firn_status take_pipe(struct box *box, const char *path)
{
    int ends[2], kept = dup(STDIN_FILENO);
    enum firn_status status;
    pid_t child;

    assert_int_equal(pipe(ends), 0);
    child = fork();
    assert_true(child >= 0);
    if (child == 0) {
        (void)dup2(ends[1], STDOUT_FILENO);
        (void)close(ends[0]);
        (void)close(ends[1]);
        (void)execlp("cat", "cat", path, (char *)NULL);
        _exit(127);
    }
    (void)close(ends[1]);
    (void)dup2(ends[0], STDIN_FILENO);
    (void)close(ends[0]);
    status = box_take_archive(box, "-");
    (void)dup2(kept, STDIN_FILENO);
    (void)close(kept);
    (void)waitpid(child, NULL, 0);
    return status;
}

/* Nothing of the test before. */
static int start_afresh(void **state)
{
    (void)state;
    run("chmod -R u+rwX out 2>/dev/null; rm -rf out a a.zip cut");
    return 0;
}

static void give_and_compare(struct box *box, const char *with, unsigned may_differ)
{
    assert_int_equal(box_close_lid(box), FIRN_OK);
    box->outlet.owner = geteuid() == 0 ? FIRN_OUTLET_OWNER_NUMBERS : FIRN_OUTLET_OWNER_NONE;
    box->outlet.devices = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "");
    assert_int_equal(tree_differences(with, "out", may_differ), 0);
    run("chmod -R u+rwX out; rm -rf out");      /* for the next one in the same test */
}

/* ---- every format and filter, made by libarchive, from a file and through a pipe ---- */

static const struct format_case {
    const char *name;
    int format, filter;
} format_cases[] = {
    { "pax", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_NONE },
    { "GNU tar", ARCHIVE_FORMAT_TAR_GNUTAR, ARCHIVE_FILTER_NONE },
    { "ustar", ARCHIVE_FORMAT_TAR_USTAR, ARCHIVE_FILTER_NONE },
    { "cpio odc", ARCHIVE_FORMAT_CPIO_POSIX, ARCHIVE_FILTER_NONE },
    { "cpio newc", ARCHIVE_FORMAT_CPIO_SVR4_NOCRC, ARCHIVE_FILTER_NONE },
    { "zip", ARCHIVE_FORMAT_ZIP, ARCHIVE_FILTER_NONE },
    { "7-Zip", ARCHIVE_FORMAT_7ZIP, ARCHIVE_FILTER_NONE },
    { "ISO 9660", ARCHIVE_FORMAT_ISO9660, ARCHIVE_FILTER_NONE },
    { "xar", ARCHIVE_FORMAT_XAR, ARCHIVE_FILTER_NONE },
    { "pax, gzip", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_GZIP },
    { "pax, bzip2", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_BZIP2 },
    { "pax, compress", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_COMPRESS },
    { "pax, lzma", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_LZMA },
    { "pax, xz", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_XZ },
    { "pax, lzip", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_LZIP },
    { "pax, zstd", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_ZSTD },
    { "pax, lz4", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_LZ4 },
    { "pax, uuencoded", ARCHIVE_FORMAT_TAR_PAX_INTERCHANGE, ARCHIVE_FILTER_UU },
    { "cpio newc, gzip", ARCHIVE_FORMAT_CPIO_SVR4_NOCRC, ARCHIVE_FILTER_GZIP },
};

static void put_entry(struct archive *archive, const char *path, mode_t mode, const char *target, const void *bytes,
                      size_t count)
{
    struct archive_entry *entry = archive_entry_new();

    archive_entry_copy_pathname(entry, path);
    archive_entry_set_mode(entry, mode);
    archive_entry_set_mtime(entry, 1234567890, 0);
    archive_entry_set_nlink(entry, 1);
    archive_entry_set_ino(entry, path[0] + 256 * (la_int64_t)count);
    archive_entry_set_uid(entry, geteuid());
    archive_entry_set_gid(entry, getegid());
    archive_entry_set_size(entry, (la_int64_t)count);
    if (target != NULL)
        archive_entry_copy_symlink(entry, target);
    if (archive_write_header(archive, entry) != ARCHIVE_OK)
        fail_msg("%s: %s", path, archive_error_string(archive));
    if (count > 0)
        assert_int_equal(archive_write_data(archive, bytes, count), count);
    archive_entry_free(entry);
}

static void make_archive(const struct format_case *c, const char *path)
{
    struct archive *archive = archive_write_new();
    size_t count;
    uint8_t *large = scratch_read("like/large", &count);

    assert_non_null(large);
    assert_int_equal(archive_write_set_format(archive, c->format), ARCHIVE_OK);
    assert_true(archive_write_add_filter(archive, c->filter) >= ARCHIVE_WARN);
    assert_int_equal(archive_write_open_filename(archive, path), ARCHIVE_OK);
    put_entry(archive, "folder", S_IFDIR | 0755, NULL, NULL, 0);
    put_entry(archive, "folder/inner", S_IFREG | 0644, NULL, "inner\n", 6);
    put_entry(archive, "link", S_IFLNK | 0777, "large", NULL, 0);
    put_entry(archive, "empty", S_IFREG | 0600, NULL, NULL, 0);
    put_entry(archive, "large", S_IFREG | 0644, NULL, large, count);
    assert_int_equal(archive_write_close(archive), ARCHIVE_OK);
    archive_write_free(archive);
    free(large);
}

static void reads_format(void **state)
{
    const struct format_case *c = *state;

    make_archive(c, "a");
    for (unsigned piped = 0; piped < 2; piped++) {
        struct box *box = box_make(NULL);

        assert_int_equal(piped ? take_pipe(box, "a") : box_take_archive(box, "a"), FIRN_OK);
        assert_string_equal(box->notes, "");
        assert_int_equal(box->taken.items, 5);
        /* ISO 9660 has rules of its own about modes and owners */
        give_and_compare(box, "like", c->format == ARCHIVE_FORMAT_ISO9660 ? TREE_ANY_MODE : 0);
        box_free(box);
    }
}

/* ---- archives by other hands ---- */

static const struct tool_case { const char *what, *command; unsigned may_differ;
} tool_cases[] = {
    { "GNU tar, pax, with everything", "tar --xattrs --xattrs-include='*' --acls --sparse --format=pax -C all -cf a .",
      TREE_ANY_HOLES },
    { "GNU tar, plain", "tar --sparse --format=gnu -C some -cf a .", TREE_ANY_HOLES },
    { "GNU tar, two parts after each other",
      "tar --format=ustar -C some -cf a . && tar --format=ustar -C some -rf a ./y", TREE_ANY_HOLES },
    { "GNU tar and pigs in blankets: gzip of xz", "tar --format=gnu -C some -c . | xz -0 | gzip -1 > a",
      TREE_ANY_HOLES },
    { "ar", "cd like-ar && rm -f ../a && ar rcU ../a empty large", 0 },
    { "zip", "cd some && zip -qry ../a.zip . && mv ../a.zip ../a", TREE_ANY_HOLES },
    { "zip through a pipe", "cd some && zip -qry - . > ../a", TREE_ANY_HOLES },
};

static void reads_others(void **state)
{
    const struct tool_case *c = *state;
    struct box *box = box_make(NULL);
    const char *like = strstr(c->command, " all ") != NULL     ? "all"
                       : strstr(c->command, "like-ar") != NULL ? "like-ar"
                                                               : "some";

    run("rm -f a");
    run(c->command);
    assert_int_equal(box_take_archive(box, "a"), FIRN_OK);
    assert_string_equal(box->notes, "");
    if (strstr(c->command, "zip -q") != NULL) {      /* zip knows seconds, and nothing of two names of one file */
        assert_int_equal(box_close_lid(box), FIRN_OK);
        assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
        assert_string_equal(box->notes, "");
        run("cd some && find . -type f | while read -r f; do cmp \"$f\" \"../out/$f\" || exit 1; done");
        run("test \"$(readlink out/link)\" = x");
        run("rm -rf out");
    } else if (strstr(c->command, "-rf") != NULL) {      /* the same name twice: the later one needs leave to replace */
        box->outlet.replace = true;
        give_and_compare(box, "some", c->may_differ);
    } else {
        give_and_compare(box, like, c->may_differ);
    }
    box_free(box);
}

/* ---- hard links that bring their bytes along, as cpio has them ---- */

/* One newc entry (the format of cpio(5) since SVR4): all numbers in eight hexadecimal digits. */
static void put_newc(FILE *file, const char *name, unsigned inode, unsigned links, const char *bytes)
{
    static const char zeros[4];
    size_t name_bytes = strlen(name) + 1, count = strlen(bytes);

    (void)fprintf(file, "070701%08X%08X%08X%08X%08X%08X%08X%08X%08X%08X%08X%08X%08X", inode, 0100644, 0, 0, links, 5,
                  (unsigned)count, 8, 1, 0, 0, (unsigned)name_bytes, 0);
    (void)fwrite(name, 1, name_bytes, file);
    (void)fwrite(zeros, 1, (4 - (110 + name_bytes) % 4) % 4, file);
    (void)fwrite(bytes, 1, count, file);
    (void)fwrite(zeros, 1, (4 - count % 4) % 4, file);
}

struct newc { const char *name; unsigned inode, links; const char *bytes; };

static const struct link_case {
    const char *what;
    struct newc entries[6];
    const char *items, *notes, *content;      /* of the file named "x/b" at the end */
    const char *command;                      /* must succeed in the folder it was given back to */
} link_cases[] = {
    { "the bytes come with the last name",
      { { "x/a", 1, 3, "" }, { "x/b", 1, 3, "" }, { "y", 2, 1, "other" }, { "x/c", 1, 3, "shared" } },
      "y\nx/a\nx/b -> x/a\nx/c -> x/a\n",
      "",
      "shared",
      "test x/a -ef x/b && test x/a -ef x/c && test $(cat y) = other" },
    { "the bytes come with the second name",
      { { "x/a", 1, 3, "" }, { "x/b", 1, 3, "shared" }, { "x/c", 1, 3, "" } },
      "x/a\nx/b -> x/a\nx/c -> x/a\n",
      "",
      "shared",
      "test x/a -ef x/b && test x/a -ef x/c" },
    { "the bytes come with every name",
      { { "x/a", 1, 3, "shared" }, { "x/b", 1, 3, "shared" }, { "x/c", 1, 3, "shared" } },
      "x/a\nx/b -> x/a\nx/c -> x/a\n",
      "",
      "shared",
      "test x/a -ef x/b && test x/a -ef x/c" },
    { "other bytes come with the second name",
      { { "x/a", 1, 2, "first" }, { "x/b", 1, 2, "second" } },
      "x/a\nx/b\n",
      "unlinked x/b\n",
      "second",
      "test $(cat x/a) = first" },
    { "no bytes come at all",
      { { "x/a", 1, 2, "" }, { "x/b", 1, 2, "" } },
      "x/a\nx/b -> x/a\n",
      "",
      "",
      "test x/a -ef x/b" },
    { "the other names are not in the archive", { { "x/b", 1, 2, "" } }, "x/b\n", "", "", "test ! -s x/b" },
    { "two files of several names, mixed",
      { { "x/b", 1, 2, "" }, { "p", 2, 2, "" }, { "q", 2, 2, "two" }, { "x/z", 1, 2, "one" } },
      "p\nq -> p\nx/b\nx/z -> x/b\n",
      "",
      "one",
      "test p -ef q && test x/b -ef x/z && test $(cat q) = two" },
};

static void keeps_links(void **state)
{
    const struct link_case *c = *state;
    struct box *box = box_make(NULL);
    FILE *file = fopen("a", "w");
    char command[512], content[64];
    size_t count;
    FILE *given;

    assert_non_null(file);
    for (size_t i = 0; i < 6 && c->entries[i].name != NULL; i++)
        put_newc(file, c->entries[i].name, c->entries[i].inode, c->entries[i].links, c->entries[i].bytes);
    put_newc(file, "TRAILER!!!", 0, 1, "");
    assert_int_equal(fclose(file), 0);
    assert_int_equal(box_take_archive(box, "a"), FIRN_OK);
    assert_string_equal(box->items, c->items);
    assert_string_equal(box->notes, c->notes);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "");
    given = fopen("out/x/b", "r");
    assert_non_null(given);
    count = fread(content, 1, sizeof content - 1, given);
    content[count] = '\0';
    (void)fclose(given);
    assert_string_equal(content, c->content);
    (void)snprintf(command, sizeof command, "cd out && %s", c->command);
    run(command);
    run("rm -rf out");
    box_free(box);
}

/* ---- names ---- */

/* A tar header by hand, since no tar would write these names. */
static void put_tar(FILE *file, const char *name, char type, const char *target, const char *bytes)
{
    uint8_t header[512] = { 0 };
    size_t count = bytes == NULL ? 0 : strlen(bytes);
    unsigned sum = 0;

    (void)snprintf((char *)header, 100, "%s", name);
    (void)snprintf((char *)header + 100, 8, "%07o", type == '5' ? 0755u : 0644u);
    memcpy(header + 108, "0000000", 8);
    memcpy(header + 116, "0000000", 8);
    (void)snprintf((char *)header + 124, 12, "%011o", (unsigned)count);
    memcpy(header + 136, "00000000005", 12);
    header[156] = (uint8_t)type;
    if (target != NULL)
        (void)snprintf((char *)header + 157, 100, "%s", target);
    memcpy(header + 257, "ustar\0" "00", 8);
    memset(header + 148, ' ', 8);
    for (unsigned i = 0; i < sizeof header; i++)
        sum += header[i];
    (void)snprintf((char *)header + 148, 8, "%06o", sum);
    (void)fwrite(header, 1, sizeof header, file);
    if (count > 0) {
        uint8_t padded[512] = { 0 };

        memcpy(padded, bytes, count);
        (void)fwrite(padded, 1, sizeof padded, file);
    }
}

static void end_tar(FILE *file)
{
    static const uint8_t zeros[1024];

    (void)fwrite(zeros, 1, sizeof zeros, file);
    assert_int_equal(fclose(file), 0);
}

static const struct evil_case {
    const char *what, *name;
    char type;
    const char *target, *items, *notes;
} evil_cases[] = {
    { "plain", "a", '0', NULL, "a\n", "" },
    { "absolute", "/etc/passwd", '0', NULL, "etc/passwd\n", "" },
    { "up and out", "../../etc/passwd", '0', NULL, "etc/passwd\n", "renamed ../../etc/passwd\n" },
    { "up in the middle", "a/../../b", '0', NULL, "b\n", "renamed a/../../b\n" },
    { "dot", "./", '5', NULL, "", "" },
    { "up and nothing else", "..", '5', NULL, "", "" },
    { "a file that is dot", ".", '0', NULL, "", "unsupported .\n" },
    { "dots and slashes", ".//a/./b//", '5', NULL, "a/b\n", "" },
    { "a link to outside", "l", '2', "../../etc/passwd", "l\n", "" },
    { "a hard link to outside", "h", '1', "/etc/passwd", "h -> etc/passwd\n", "" },
    { "a hard link to nothing", "h", '1', "..", "", "unsupported h\n" },
    { "a device", "null", '3', NULL, "null\n", "" },
    { "no UTF-8", "caf\xE9", '0', NULL, "caf\xE9\n", "" },
    { "a new line", "a\nb", '0', NULL, "a\nb\n", "" },
    { "decomposed UTF-8", "cafe\xCC\x81", '0', NULL, "cafe\xCC\x81\n", "" },
};

static void tames_names(void **state)
{
    const struct evil_case *c = *state;
    struct box *box = box_make(NULL);
    FILE *file = fopen("a", "w");

    assert_non_null(file);
    put_tar(file, c->name, c->type, c->target, c->type == '0' ? "bytes" : NULL);
    end_tar(file);
    assert_int_equal(box_take_archive(box, "a"), FIRN_OK);
    assert_string_equal(box->items, c->items);
    assert_string_equal(box->notes, c->notes);
    box_free(box);
}

static void leaves_out(void **state)
{
    static const char *const word = "a";
    struct box *box = box_make(NULL);
    FILE *file = fopen("a", "w");

    (void)state;
    assert_non_null(file);
    put_tar(file, "a", '0', NULL, "bytes");
    put_tar(file, "b", '0', NULL, "bytes");
    put_tar(file, "link to a", '1', "a", NULL);
    put_tar(file, "link to b", '1', "b", NULL);
    put_tar(file, "a/below", '0', NULL, "bytes");
    end_tar(file);
    assert_int_equal(firn_pattern_make(&word, 1, firn_memory_system(), &box->intake.exclude), FIRN_OK);
    assert_int_equal(box_take_archive(box, "a"), FIRN_OK);
    assert_string_equal(box->items, "b\nlink to b -> b\n");
    assert_string_equal(box->notes, "unreadable link to a\n");
    assert_int_equal(box->taken.excluded, 2);
    firn_pattern_free(box->intake.exclude);
    box_free(box);
}

static void takes_a_lone_file(void **state)
{
    static const struct { const char *command, *path, *item; } cases[] = {
        { "gzip -c some/x > plan.dwg.gz", "plan.dwg.gz", "plan.dwg\n" },
        { "xz -c some/x > plan.xz", "./plan.xz", "plan\n" },
        { "zstd -qfc some/x > plan", "plan", "plan\n" },
        { "lz4 -qc some/x > .lz4", ".lz4", ".lz4\n" },
    };

    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct box *box = box_make(NULL);

        run(cases[i].command);
        assert_int_equal(box_take_archive(box, cases[i].path), FIRN_OK);
        assert_string_equal(box->items, cases[i].item);
        assert_string_equal(box->notes, "");
        assert_int_equal(box->taken.bytes, 300000);
        box_free(box);
    }
}

/* ---- what is no archive, or broken ---- */

static const struct junk_case { const char *what, *command; enum firn_status status;
} junk_cases[] = {
    { "not there", "rm -f a", FIRN_NO_INPUT },
    { "empty", ": > a", FIRN_BAD_DATA },
    { "text", "echo 'this is no archive, but words' > a", FIRN_BAD_DATA },
    { "noise", "head -c 100000 some/x > a", FIRN_BAD_DATA },
    { "zeros alone", "head -c 10240 /dev/zero > a", FIRN_OK }, /* what tar makes of nothing: an end mark */
    { "mtree, which names other files",
      "printf '#mtree\\n./passwd type=file contents=/etc/passwd mode=0644 size=5\\n' > a", FIRN_BAD_DATA },
    { "a folder", "rm -f a; mkdir -p some/folder; ln -sfn some/folder a", FIRN_IO },
    { "lrzip, which another program would read", "rm -f a; (printf 'LRZI\\0\\6'; head -c 9000 some/x) > a",
      FIRN_BAD_DATA },
    { "lzop, likewise", "(printf '\\211LZO\\0\\r\\n\\032\\n\\020\\100'; head -c 9000 some/x) > a", FIRN_BAD_DATA },
    { "grzip, likewise", "(printf 'GRZipII\\0\\2\\4:)'; head -c 9000 some/x) > a", FIRN_BAD_DATA },
};

static void refuses_junk(void **state)
{
    const struct junk_case *c = *state;

    for (unsigned piped = 0; piped < 2; piped++) {
        struct box *box = box_make(NULL);
        enum firn_status status;

        run(c->command);
        if (piped && (c->status == FIRN_NO_INPUT || c->status == FIRN_IO)) {
            box_free(box);
            continue;
        }
        status = piped ? take_pipe(box, "a") : box_take_archive(box, "a");
        assert_int_equal(status, c->status);
        assert_int_equal(box->taken.items, 0);
        box_free(box);
    }
    assert_int_not_equal(access("started", F_OK), 0);      /* by the programs that set_up put in the way */
}

/*
 * A tar archive cut at every place that matters, plain and compressed: never taken for whole. What came before the cut
 * is stored, and whole, if the caller asks for it.
 */
static void notices_cuts(void **state)
{
    static const char *const makes[] = {
        "tar --format=pax -b 1 -C like -cf a folder empty large",
        "tar --format=pax -b 1 -C like -c folder empty large | gzip -1 > a",
        "tar --format=pax -b 1 -C like -c folder empty large | zstd -q > a",
        "cd like && zip -q0r ../a.zip folder empty large && mv ../a.zip ../a",
    };

    (void)state;
    for (size_t i = 0; i < sizeof makes / sizeof makes[0]; i++) {
        struct stat facts;

        run("rm -f a");
        run(makes[i]);
        assert_int_equal(stat("a", &facts), 0);
        for (off_t cut = 256; cut < facts.st_size; cut += cut < 6000 ? 256 : facts.st_size / 13) {
            struct box *box = box_make(NULL);
            char command[64];

            if (i == 0 && facts.st_size - cut <= 512)
                break;                    /* one of the two records of the end mark is left: that is an end */
            (void)snprintf(command, sizeof command, "head -c %ld a > cut", (long)cut);
            run(command);
            assert_int_equal(box_take_archive(box, "cut"), FIRN_BAD_DATA);
            if (box->taken.items > 0)
                assert_true(box->taken.findings[FIRN_INTAKE_DAMAGED] > 0);
            box_free(box);
            box = box_make(NULL);
            box->intake.keep_beginning = true;
            if (box_take_archive(box, "cut") == FIRN_OK) {
                assert_true(box->taken.findings[FIRN_INTAKE_DAMAGED] > 0);
                assert_int_equal(box_close_lid(box), FIRN_OK);
                assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
                run("cd out && find . -type f | while read -r f; do cmp \"$f\" \"../like/$f\" || exit 1; done");
                run("rm -rf out");
            }
            box_free(box);
        }
    }
}

static void notices_changed_bytes(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    run("rm -f a; cd some && zip -q0 ../a.zip x y && mv ../a.zip ../a");
    run("printf 'XXXX' | dd of=a bs=1 seek=5000 conv=notrunc status=none");      /* within x; its sum is wrong now */
    assert_int_equal(box_take_archive(box, "a"), FIRN_BAD_DATA);
    assert_string_equal(box->notes, "damaged x\n");
    assert_string_equal(box->items, "y\n");
    box_free(box);
}

static void knows_encryption(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    run("rm -f a; cd some && zip -q -P secret ../a.zip x && zip -q ../a.zip y && mv ../a.zip ../a");
    assert_int_equal(box_take_archive(box, "a"), FIRN_OK);
    assert_string_equal(box->notes, "encrypted x\n");
    assert_string_equal(box->items, "y\n");
    assert_int_equal(firn_intake_left_out(&box->taken), 1);
    box_free(box);
}

static void lives_without_memory(void **state)
{
    static const char *const makes[] = { "tar --format=pax -C like -cf a .",
                                         "rm -f a; cd like && zip -qry ../a.zip . && mv ../a.zip ../a" };

    (void)state;
    for (size_t i = 0; i < sizeof makes / sizeof makes[0]; i++) {
        enum firn_status status = FIRN_NO_MEMORY;

        run(makes[i]);
        for (unsigned n = 1; status != FIRN_OK; n++) {
            struct fault_memory fault;
            struct box *box;

            fault_memory_make(&fault, n);
            box = box_make(&fault.memory);
            status = i == 0 ? box_take_archive(box, "a") : take_pipe(box, "a");
            assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
            box_free(box);
            assert_int_equal(fault.outstanding, 0);
        }
    }
}

static int set_up(void **state)
{
    (void)state;
    scratch_make();
    assert_int_equal(chdir(scratch_path("")), 0);
    tree_of_everything("all");
    /* GNU tar and libarchive spell such names differently in pax headers, and neither reads the other */
    assert_int_equal(removexattr("all/noted", "user.a=b% \xC3\xA9"), 0);
    tree_folder("like", 0755);
    tree_folder("like/folder", 0755);
    tree_file("like/folder/inner", "inner\n", 6, 0644);
    assert_int_equal(symlink("large", "like/link"), 0);
    tree_file("like/empty", "", 0, 0600);
    tree_pattern("like/large", 500000, 3);
    tree_folder("like-ar", 0755);
    tree_file("like-ar/empty", "", 0, 0600);
    tree_pattern("like-ar/large", 500000, 3);
    run("cd like && find . -exec touch -h -d @1234567890 '{}' + && cd ../like-ar && touch -d @1234567890 *");
    tree_folder("some", 0755);
    tree_pattern("some/x", 300000, 4);
    tree_file("some/y", "why", 3, 0755);
    assert_int_equal(link("some/x", "some/z"), 0);
    assert_int_equal(symlink("x", "some/link"), 0);
    tree_file("some/holes", "", 0, 0644);
    assert_int_equal(truncate("some/holes", 1 << 20), 0);
    run("find some -exec touch -h -d @1234567891 '{}' +");
    run("mkdir bin; for p in lrzip lzop grzip; do printf '#!/bin/sh\\n: > %s/started\\ncat\\n' \"$PWD\" > bin/$p; "
        "chmod 755 bin/$p; done");
    run("PATH=\"$PWD/bin:$PATH\" command -v lrzip > /dev/null");
    {
        char path[2048];

        (void)snprintf(path, sizeof path, "%s:%s", scratch_path("bin"), getenv("PATH"));
        assert_int_equal(setenv("PATH", path, 1), 0);
    }
    return 0;
}

static int tear_down(void **state)
{
    (void)state;
    scratch_remove();
    return 0;
}

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

int main(void)
{
    struct CMUnitTest tests[128];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test_setup(leaves_out, start_afresh),
        cmocka_unit_test_setup(takes_a_lone_file, start_afresh),
        cmocka_unit_test_setup(notices_cuts, start_afresh),
        cmocka_unit_test_setup(notices_changed_bytes, start_afresh),
        cmocka_unit_test_setup(knows_encryption, start_afresh),
        cmocka_unit_test_setup(lives_without_memory, start_afresh),
    };

#define ROWS(function, rows, label)                                                                                    \
    for (size_t i = 0; i < COUNT(rows); i++)                                                                           \
    tests[count++] = (struct CMUnitTest){ .name = (rows)[i].label,                                                     \
                                          .test_func = function,                                                       \
                                          .setup_func = start_afresh,                                                  \
                                          .initial_state = (void *)(uintptr_t) & (rows)[i] }
    ROWS(reads_format, format_cases, name);
    ROWS(reads_others, tool_cases, what);
    ROWS(keeps_links, link_cases, what);
    ROWS(tames_names, evil_cases, what);
    ROWS(refuses_junk, junk_cases, what);
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("archive", tests, count, set_up, tear_down);
}
