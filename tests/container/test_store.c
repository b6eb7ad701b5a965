/*
 * tests/container/test_store.c - stores over files, pipes, memory and temporary files, and stages
 *
 * What happens is looked at from outside through the system: names in folders, modes, page residence, other processes.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#define _GNU_SOURCE     /* O_TMPFILE */
#include "firn/store.h"

#include "container/store_beside.h"
#include "help/fault_memory.h"
#include "help/scratch.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <linux/filter.h>
#include <linux/seccomp.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/statfs.h>
#include <sys/syscall.h>
#include <unistd.h>

#include <cmocka.h>

static const struct firn_memory *memory;

/* A child's way to say where it failed. */
#define CHILD_NEEDS(fact)                                                                                     \
    do {                                                                                                      \
        if (!(fact)) {                                                                                        \
            fprintf(stderr, "child, line %d: %s\n", __LINE__, #fact);                                         \
            return 1;                                                                                         \
        }                                                                                                     \
    } while (0)

static void expect_file(const char *name, const char *text)
{
    size_t count;
    uint8_t *bytes = scratch_read(name, &count);

    assert_non_null(bytes);
    assert_int_equal(count, strlen(text));
    assert_memory_equal(bytes, text, count);
    free(bytes);
}

static enum firn_status put(struct firn_store *store, uint64_t at, const char *text)
{
    int why;

    return store->write_at(store->self, at, text, strlen(text), &why);
}

/* --- opening --- */

static const struct open_case {
    const char *name, *path;      /* path within the scratch folder unless it starts with a slash */
    enum firn_store_use use;
    enum firn_status status;
    int os_error;
} open_cases[] = {
    { "open: a file", "plain", FIRN_STORE_READ, FIRN_OK, 0 },
    { "open: a file to mend", "plain", FIRN_STORE_MEND, FIRN_OK, 0 },
    { "open: through a link", "link", FIRN_STORE_READ, FIRN_OK, 0 },
    { "open: nothing there", "nothing", FIRN_STORE_READ, FIRN_NO_INPUT, ENOENT },
    { "open: nothing there to mend", "nothing", FIRN_STORE_MEND, FIRN_NO_INPUT, ENOENT },
    { "open: a folder", "", FIRN_STORE_READ, FIRN_NO_INPUT, EISDIR },
    { "open: a fifo does not make us wait", "fifo", FIRN_STORE_READ, FIRN_NO_INPUT, ESPIPE },
    { "open: a terminal-like device", "/dev/null", FIRN_STORE_MEND, FIRN_NO_INPUT, ESPIPE },
    { "open: below a file", "plain/below", FIRN_STORE_READ, FIRN_NO_INPUT, ENOTDIR },
};

static void opens(void **state)
{
    const struct open_case *c = *state;
    const char *path = c->path[0] == '/' ? c->path : scratch_path(c->path);
    struct firn_fault fault = { 0 };
    struct firn_store store;

    scratch_write("plain", "abc", 3, 0644);
    assert_true(symlink("plain", scratch_path("link")) == 0 || errno == EEXIST);
    assert_true(mkfifo(scratch_path("fifo"), 0600) == 0 || errno == EEXIST);
    assert_int_equal(firn_store_open(path, c->use, memory, &store, &fault), c->status);
    if (c->status == FIRN_OK) {
        store.close(store.self);
        return;
    }
    assert_int_equal(fault.os_error, c->os_error);
    assert_non_null(strstr(fault.what, c->path));
}

static int open_what_is_read_only(void *self)
{
    struct firn_fault fault = { 0 };
    struct firn_store store;

    (void)self;
    if (!scratch_be_nobody())
        return 77;
    CHILD_NEEDS(firn_store_open(scratch_path("read-only"), FIRN_STORE_READ, memory, &store, &fault) == FIRN_OK);
    CHILD_NEEDS(put(&store, 0, "x") == FIRN_READ_ONLY);
    store.close(store.self);
    CHILD_NEEDS(firn_store_open(scratch_path("read-only"), FIRN_STORE_MEND, memory, &store, &fault) == FIRN_READ_ONLY);
    CHILD_NEEDS(fault.os_error == EACCES);
    CHILD_NEEDS(firn_store_open(scratch_path("secret"), FIRN_STORE_MEND, memory, &store, &fault) == FIRN_NO_INPUT);
    CHILD_NEEDS(fault.os_error == EACCES);
    return 0;
}

static void tells_read_only_from_absent(void **state)
{
    int outcome;

    (void)state;
    scratch_write("read-only", "abc", 3, 0444);
    scratch_write("secret", "abc", 3, 0000);
    outcome = scratch_in_child(open_what_is_read_only, NULL);
    if (outcome == 77)
        skip();
    assert_int_equal(outcome, 0);
}

/* --- reading and writing --- */

static void reads_and_writes_a_file(void **state)
{
    struct firn_fault fault;
    struct firn_store store;
    uint64_t bytes;
    char text[16];
    size_t got;
    int why;

    (void)state;
    scratch_write("numbers", "0123456789", 10, 0644);
    assert_int_equal(firn_store_open(scratch_path("numbers"), FIRN_STORE_MEND, memory, &store, &fault), FIRN_OK);
    assert_int_equal(store.read_at(store.self, 4, text, 3, &got, &why), FIRN_OK);
    assert_int_equal(got, 3);
    assert_memory_equal(text, "456", 3);
    assert_int_equal(store.read_at(store.self, 8, text, sizeof text, &got, &why), FIRN_OK);
    assert_int_equal(got, 2);
    assert_int_equal(store.read_at(store.self, 10, text, sizeof text, &got, &why), FIRN_OK);
    assert_int_equal(got, 0);
    assert_int_equal(store.read_at(store.self, UINT64_MAX - 3, text, sizeof text, &got, &why), FIRN_OK);
    assert_int_equal(got, 0);

    assert_int_equal(put(&store, 2, "two"), FIRN_OK);
    assert_int_equal(put(&store, 12, "end"), FIRN_OK);
    assert_int_equal(store.size(store.self, &bytes, &why), FIRN_OK);
    assert_int_equal(bytes, 15);
    assert_int_equal(store.write_at(store.self, UINT64_MAX - 3, text, sizeof text, &why), FIRN_IO);
    assert_int_equal(why, EFBIG);
    assert_int_equal(store.resize(store.self, 7, &why), FIRN_OK);
    assert_int_equal(store.sync(store.self, &why), FIRN_OK);
    store.close(store.self);
    expect_file("numbers", "01two56");
}

/* The kernel gives EIO for unmapped places of /proc/self/mem: a real error in the middle of a real file. */
static void tells_what_was_read_before_an_error(void **state)
{
    size_t page = (size_t)sysconf(_SC_PAGESIZE), got;
    uint8_t *pages = mmap(NULL, 2 * page, PROT_READ | PROT_WRITE, MAP_PRIVATE | MAP_ANONYMOUS, -1, 0);
    uint8_t *bytes = malloc(2 * page);
    struct firn_fault fault;
    struct firn_store store;
    int why = 0;

    (void)state;
    assert_true(pages != MAP_FAILED && bytes != NULL);
    memset(pages, 'm', page);
    assert_int_equal(munmap(pages + page, page), 0);
    assert_int_equal(firn_store_open("/proc/self/mem", FIRN_STORE_READ, memory, &store, &fault), FIRN_OK);
    assert_int_equal(store.read_at(store.self, (uintptr_t)pages, bytes, 2 * page, &got, &why), FIRN_IO);
    assert_int_equal(got, page);
    assert_memory_equal(bytes, pages, page);
    assert_int_equal(why, EIO);
    store.close(store.self);
    munmap(pages, page);
    free(bytes);
}

/* The kernel counts a device in sectors of 512 bytes in /sys; the first disk that may be read is compared. */
static void knows_the_size_of_a_device(void **state)
{
    static const char *const names[] = { "vda", "sda", "nvme0n1", "mmcblk0", "xvda", "vdb", "sdb" };

    (void)state;
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        char path[64], device[64];
        unsigned long long sectors;
        struct firn_fault fault;
        struct firn_store store;
        uint64_t bytes;
        FILE *told;
        int why;

        (void)snprintf(path, sizeof path, "/sys/class/block/%s/size", names[i]);
        (void)snprintf(device, sizeof device, "/dev/%s", names[i]);
        told = fopen(path, "r");
        if (told == NULL)
            continue;
        assert_int_equal(fscanf(told, "%llu", &sectors), 1);
        fclose(told);
        if (firn_store_open(device, FIRN_STORE_READ, memory, &store, &fault) != FIRN_OK)
            continue;
        assert_int_equal(store.size(store.self, &bytes, &why), FIRN_OK);
        assert_int_equal(bytes, sectors * 512);
        store.close(store.self);
        return;
    }
    skip();
}

static unsigned resident_pages(const char *name, size_t bytes)
{
    size_t page = (size_t)sysconf(_SC_PAGESIZE);
    int descriptor = open(scratch_path(name), O_RDONLY);
    unsigned char in_memory[256];
    unsigned pages = 0;
    void *map = mmap(NULL, bytes, PROT_READ, MAP_SHARED, descriptor, 0);

    assert_true(descriptor >= 0 && map != MAP_FAILED && bytes / page <= sizeof in_memory);
    assert_int_equal(mincore(map, bytes, in_memory), 0);
    for (size_t i = 0; i < bytes / page; i++)
        pages += in_memory[i] & 1;
    munmap(map, bytes);
    close(descriptor);
    return pages;
}

static void forgets(void **state)
{
    enum { BYTES = 1 << 20, TMPFS = 0x01021994, OVERLAY = 0x794c7630 };
    struct firn_fault fault;
    struct firn_store store;
    struct statfs facts;
    uint8_t *bytes;
    int why;

    (void)state;
    assert_int_equal(statfs(scratch_path(""), &facts), 0);
    if (facts.f_type == TMPFS || facts.f_type == OVERLAY)
        skip();      /* there the memory is the medium, or another file's */
    bytes = calloc(1, BYTES);
    assert_non_null(bytes);
    scratch_write("forgotten", bytes, BYTES, 0644);
    assert_int_equal(firn_store_open(scratch_path("forgotten"), FIRN_STORE_MEND, memory, &store, &fault), FIRN_OK);
    assert_int_equal(store.write_at(store.self, 0, bytes, BYTES, &why), FIRN_OK);
    assert_int_equal(store.sync(store.self, &why), FIRN_OK);
    assert_int_not_equal(resident_pages("forgotten", BYTES), 0);
    store.forget(store.self, 0, BYTES);
    assert_int_equal(resident_pages("forgotten", BYTES), 0);
    store.close(store.self);
    free(bytes);
}

/* --- locks --- */

static int lock_status(void *self)
{
    struct firn_fault fault = { 0 };
    struct firn_store store;
    enum firn_status status;

    (void)self;
    CHILD_NEEDS(firn_store_open(scratch_path("locked"), FIRN_STORE_READ, memory, &store, &fault) == FIRN_OK);
    status = firn_store_lock(&store, &fault);
    if (status != FIRN_OK)
        CHILD_NEEDS(strstr(fault.what, "locked") != NULL);
    return (int)status;
}

/* What is lent is what is in the file; writing on it leaves no trace; what is not all there is not lent. */
static void lends(void **state)
{
    enum { SIZE = 3 * 4096 + 100 };
    uint8_t bytes[SIZE], *lent, *kept;
    struct firn_store store;
    struct firn_fault fault;
    int os_error;
    size_t count;

    for (size_t i = 0; i < SIZE; i++)
        bytes[i] = (uint8_t)(i * 7 + i / 251);
    scratch_write("lent", bytes, SIZE, 0644);
    assert_int_equal(firn_store_open(scratch_path("lent"), FIRN_STORE_MEND, memory, &store, &fault), FIRN_OK);
    for (size_t at = 0; at < SIZE; at += 1000) {
        count = SIZE - at < 5000 ? SIZE - at : 5000;
        assert_int_equal(store.lend(store.self, at, count, &lent), FIRN_OK);
        assert_memory_equal(lent, bytes + at, count);
        memset(lent, 0xEE, count);
    }
    assert_int_not_equal(store.lend(store.self, 0, SIZE + 1, &lent), FIRN_OK);
    assert_int_not_equal(store.lend(store.self, SIZE, 1, &lent), FIRN_OK);
    assert_int_not_equal(store.lend(store.self, UINT64_MAX - 3, 8, &lent), FIRN_OK);
    assert_int_not_equal(store.lend(store.self, 0, 0, &lent), FIRN_OK);
    assert_int_equal(store.write_at(store.self, 4096, "mended", 6, &os_error), FIRN_OK);
    assert_int_equal(store.lend(store.self, 4096, 6, &lent), FIRN_OK);
    assert_memory_equal(lent, "mended", 6);
    store.close(store.self);
    memcpy(bytes + 4096, "mended", 6);
    kept = scratch_read("lent", &count);
    assert_int_equal(count, SIZE);
    assert_memory_equal(kept, bytes, SIZE);
    free(kept);
    (void)state;
}

static void locks_others_out(void **state)
{
    struct firn_fault fault;
    struct firn_store store, again;

    (void)state;
    scratch_write("locked", "abc", 3, 0644);
    assert_int_equal(firn_store_open(scratch_path("locked"), FIRN_STORE_READ, memory, &store, &fault), FIRN_OK);
    assert_int_equal(scratch_in_child(lock_status, NULL), FIRN_OK);      /* and it ends with the child */
    assert_int_equal(firn_store_lock(&store, &fault), FIRN_OK);
    assert_int_equal(scratch_in_child(lock_status, NULL), FIRN_BUSY);
    assert_int_equal(firn_store_open(scratch_path("locked"), FIRN_STORE_MEND, memory, &again, &fault), FIRN_OK);
    assert_int_equal(firn_store_lock(&again, &fault), FIRN_BUSY);
    store.close(store.self);
    assert_int_equal(firn_store_lock(&again, &fault), FIRN_OK);
    again.close(again.self);
    assert_int_equal(scratch_in_child(lock_status, NULL), FIRN_OK);
}

/* --- stages --- */

/*
 * One story of a stage. Before it starts, `before` stands at the place (NULL: nothing), `meanwhile` comes there while
 * the stage is open. At the end `after` stands there, and nothing else is in the folder.
 */
static const struct stage_case {
    const char *name, *before, *meanwhile;
    bool replace, keep;
    enum firn_status opened, kept;
    const char *after;
} stage_cases[] = {
    { "stage: kept", NULL, NULL, false, true, FIRN_OK, FIRN_OK, "new" },
    { "stage: abandoned", NULL, NULL, false, false, FIRN_OK, FIRN_OK, NULL },
    { "stage: kept, nothing to replace", NULL, NULL, true, true, FIRN_OK, FIRN_OK, "new" },
    { "stage: replaces", "old", NULL, true, true, FIRN_OK, FIRN_OK, "new" },
    { "stage: replaces what came meanwhile", NULL, "old", true, true, FIRN_OK, FIRN_OK, "new" },
    { "stage: abandoned, the old one stays", "old", NULL, true, false, FIRN_OK, FIRN_OK, "old" },
    { "stage: taken from the start", "old", NULL, false, false, FIRN_EXISTS, FIRN_OK, "old" },
    { "stage: taken meanwhile", NULL, "old", false, true, FIRN_OK, FIRN_EXISTS, "old" },
};

static int live_stage(void *self)
{
    const struct stage_case *c = self;
    struct firn_fault fault = { 0 };
    struct firn_store_stage *stage;
    struct firn_store *store;
    unsigned names;

    if (c->before != NULL)
        scratch_write("box/staged", c->before, strlen(c->before), 0644);
    CHILD_NEEDS(firn_store_stage_open(scratch_path("box/staged"), c->replace, memory, &stage, &fault) == c->opened);
    if (c->opened != FIRN_OK) {
        CHILD_NEEDS(strstr(fault.what, "box/staged") != NULL && stage == NULL);
        return 0;
    }
    store = firn_store_stage_store(stage);
    CHILD_NEEDS(put(store, 0, "new") == FIRN_OK);
    if (c->meanwhile != NULL)
        scratch_write("box/staged", c->meanwhile, strlen(c->meanwhile), 0644);
    names = scratch_entries();
    if (c->keep) {
        CHILD_NEEDS(firn_store_stage_keep(stage, &fault) == c->kept);
        CHILD_NEEDS(c->kept == FIRN_OK || fault.os_error == EEXIST);
    }
    CHILD_NEEDS(scratch_entries() == names);
    firn_store_stage_close(stage);
    return 0;
}

static unsigned box_entries(void)
{
    char command[SCRATCH_PATH_ROOM + 64];
    unsigned entries = 0;
    FILE *list;

    (void)snprintf(command, sizeof command, "ls -A '%s' | wc -l", scratch_path("box"));
    list = popen(command, "r");
    assert_non_null(list);
    assert_int_equal(fscanf(list, "%u", &entries), 1);
    pclose(list);
    return entries;
}

static void stages_with(const struct stage_case *c, int (*life)(void *self))
{
    int outcome;

    assert_int_equal(mkdir(scratch_path("box"), 0777), 0);
    outcome = scratch_in_child(life, (void *)(uintptr_t)c);
    if (c->after != NULL && outcome == 0)
        expect_file("box/staged", c->after);
    if (outcome == 0)
        assert_int_equal(box_entries(), c->after != NULL ? 1 : 0);
    (void)unlink(scratch_path("box/staged"));
    assert_int_equal(rmdir(scratch_path("box")), 0);
    if (outcome == 77)
        skip();
    assert_int_equal(outcome, 0);
}

static void stages(void **state)
{
    stages_with(*state, live_stage);
}

/* A file system without nameless files, and perhaps without RENAME_NOREPLACE, played by a filter of system calls. */
static bool be_poor(bool poorer)
{
    const unsigned tmpfile_bit = O_TMPFILE & ~(unsigned)O_DIRECTORY;
    struct sock_filter rules[] = {
        BPF_STMT(BPF_LD | BPF_W | BPF_ABS, offsetof(struct seccomp_data, nr)),
        BPF_JUMP(BPF_JMP | BPF_JEQ | BPF_K, SYS_openat, 0, 3),
        BPF_STMT(BPF_LD | BPF_W | BPF_ABS, offsetof(struct seccomp_data, args[2])),
        BPF_JUMP(BPF_JMP | BPF_JSET | BPF_K, tmpfile_bit, 0, 3),
        BPF_STMT(BPF_RET | BPF_K, SECCOMP_RET_ERRNO | EOPNOTSUPP),
        BPF_JUMP(BPF_JMP | BPF_JEQ | BPF_K, SYS_renameat2, 0, 1),
        BPF_STMT(BPF_RET | BPF_K, poorer ? SECCOMP_RET_ERRNO | EINVAL : SECCOMP_RET_ALLOW),
        BPF_STMT(BPF_RET | BPF_K, SECCOMP_RET_ALLOW),
    };
    struct sock_fprog filter = { sizeof rules / sizeof rules[0], rules };

    return prctl(PR_SET_NO_NEW_PRIVS, 1, 0, 0, 0) == 0 && prctl(PR_SET_SECCOMP, SECCOMP_MODE_FILTER, &filter) == 0;
}

static int live_stage_poorly(void *self)
{
    return be_poor(false) ? live_stage(self) : 77;
}

static int live_stage_more_poorly(void *self)
{
    return be_poor(true) ? live_stage(self) : 77;
}

static void stages_with_temporary_names(void **state)
{
    stages_with(*state, live_stage_poorly);
    stages_with(*state, live_stage_more_poorly);
}

static int name_long(void *self)
{
    char path[SCRATCH_PATH_ROOM];
    struct firn_fault fault;
    struct firn_store_stage *stage;

    CHILD_NEEDS(*(bool *)self || be_poor(true));
    (void)snprintf(path, sizeof path, "%s%0255d", scratch_path(""), 7);      /* NAME_MAX */
    CHILD_NEEDS(firn_store_stage_open(path, true, memory, &stage, &fault) == FIRN_OK);
    CHILD_NEEDS(firn_store_stage_keep(stage, &fault) == FIRN_OK);
    firn_store_stage_close(stage);
    CHILD_NEEDS(unlink(path) == 0);
    return 0;
}

static void stages_a_long_name(void **state)
{
    bool rich = true, poor = false;

    (void)state;
    assert_int_equal(scratch_in_child(name_long, &rich), 0);
    assert_int_equal(scratch_in_child(name_long, &poor), 0);
}

static const struct refused_case {
    const char *name, *path;
    bool replace;
    enum firn_status status;
    int os_error;
} refused_cases[] = {
    { "stage: no such folder", "nowhere/staged", false, FIRN_CANNOT_CREATE, ENOENT },
    { "stage: a folder in its place", "", true, FIRN_CANNOT_CREATE, EISDIR },
    { "stage: a device in its place", "/dev/null", true, FIRN_CANNOT_CREATE, EEXIST },
    { "stage: a device, not to be replaced", "/dev/null", false, FIRN_EXISTS, EEXIST },
    { "stage: below a file", "/etc/passwd/staged", false, FIRN_CANNOT_CREATE, ENOTDIR },
};

static void refuses_a_stage(void **state)
{
    const struct refused_case *c = *state;
    struct firn_store_stage *stage;
    struct firn_fault fault = { 0 };
    const char *path = c->path[0] == '/' ? c->path : scratch_path(c->path);

    assert_int_equal(firn_store_stage_open(path, c->replace, memory, &stage, &fault), c->status);
    assert_int_equal(fault.os_error, c->os_error);
    assert_null(stage);
}

static void gives_the_mode_that_umask_leaves(void **state)
{
    mode_t before = umask(027);
    struct firn_store_stage *stage;
    struct firn_fault fault;
    struct stat facts;

    (void)state;
    assert_int_equal(firn_store_stage_open(scratch_path("masked"), false, memory, &stage, &fault), FIRN_OK);
    assert_int_equal(firn_store_stage_keep(stage, &fault), FIRN_OK);
    firn_store_stage_close(stage);
    umask(before);
    assert_int_equal(stat(scratch_path("masked"), &facts), 0);
    assert_int_equal(facts.st_mode & 07777, 0640);
}

static int stage_killed(void *self)
{
    struct firn_store_stage *stage;
    struct firn_fault fault;

    (void)self;
    CHILD_NEEDS(firn_store_stage_open(scratch_path("killed"), false, memory, &stage, &fault) == FIRN_OK);
    CHILD_NEEDS(put(firn_store_stage_store(stage), 0, "half") == FIRN_OK);
    raise(SIGKILL);
    return 0;
}

static void leaves_no_trace_when_killed(void **state)
{
    int probe = open(scratch_path(""), O_TMPFILE | O_RDWR, 0600);
    unsigned before = scratch_entries();

    (void)state;
    if (probe < 0)
        skip();
    close(probe);
    assert_int_equal(scratch_in_child(stage_killed, NULL), -1);
    assert_int_equal(scratch_entries(), before);
}

/* --- full --- */

static int fill_up(void *self)
{
    struct rlimit limit = { 100000, 100000 };
    static char bytes[65536];
    struct firn_store_stage *stage;
    struct firn_store *store;
    struct firn_fault fault = { 0 };
    uint64_t size;
    int why = 0;

    (void)self;
    signal(SIGXFSZ, SIG_IGN);
    CHILD_NEEDS(setrlimit(RLIMIT_FSIZE, &limit) == 0);
    CHILD_NEEDS(firn_store_stage_open(scratch_path("full"), false, memory, &stage, &fault) == FIRN_OK);
    store = firn_store_stage_store(stage);
    CHILD_NEEDS(store->write_at(store->self, 0, bytes, sizeof bytes, &why) == FIRN_OK);
    CHILD_NEEDS(store->write_at(store->self, sizeof bytes, bytes, sizeof bytes, &why) == FIRN_IO);
    CHILD_NEEDS(why == EFBIG);
    CHILD_NEEDS(store->size(store->self, &size, &why) == FIRN_OK && size == 100000);
    firn_store_stage_close(stage);
    return 0;
}

static void tells_when_full(void **state)
{
    unsigned before = scratch_entries();

    (void)state;
    assert_int_equal(scratch_in_child(fill_up, NULL), 0);
    assert_int_equal(scratch_entries(), before);
}

/* --- pipes --- */

static void writes_a_pipe_in_order(void **state)
{
    struct firn_store store;
    uint64_t bytes;
    char text[16];
    size_t got;
    int ends[2], why;

    (void)state;
    assert_int_equal(pipe(ends), 0);
    assert_int_equal(firn_store_pipe(ends[1], memory, &store), FIRN_OK);
    assert_int_equal(put(&store, 0, "one"), FIRN_OK);
    assert_int_equal(put(&store, 3, "two"), FIRN_OK);
    assert_int_equal(put(&store, 3, "back"), FIRN_IO);
    assert_int_equal(put(&store, 7, "ahead"), FIRN_IO);
    assert_int_equal(store.size(store.self, &bytes, &why), FIRN_OK);
    assert_int_equal(bytes, 6);
    assert_int_equal(store.resize(store.self, 6, &why), FIRN_OK);
    assert_int_equal(store.resize(store.self, 0, &why), FIRN_IO);
    assert_int_equal(store.read_at(store.self, 0, text, 3, &got, &why), FIRN_IO);
    assert_int_equal(why, ESPIPE);
    assert_int_equal(store.sync(store.self, &why), FIRN_OK);
    store.close(store.self);
    assert_int_equal(write(ends[1], "!", 1), 1);      /* the descriptor is still ours */
    assert_int_equal(read(ends[0], text, sizeof text), 7);
    assert_memory_equal(text, "onetwo!", 7);
    close(ends[0]);
    close(ends[1]);
}

static int drain_slowly(void *self)
{
    static char bytes[4096];
    unsigned long sum = 0;
    ssize_t got;

    close(((int *)self)[1]);
    while ((got = read(((int *)self)[0], bytes, sizeof bytes)) > 0)
        sum += (unsigned long)got;
    return sum == 300000 ? 0 : 1;
}

/* To a reader that is slow, or gone; without waiting in the call itself, as a terminal may be left by its last user. */
static int pour(void *self)
{
    const bool *broken = self;
    static char bytes[300000];
    struct firn_store store;
    pid_t child = -1;
    int ends[2], why = 0;

    signal(SIGPIPE, SIG_IGN);
    CHILD_NEEDS(pipe(ends) == 0);
    if (!*broken && (child = fork()) == 0)
        _exit(drain_slowly(ends));
    close(ends[0]);
    CHILD_NEEDS(fcntl(ends[1], F_SETFL, O_NONBLOCK) == 0);
    CHILD_NEEDS(firn_store_pipe(ends[1], memory, &store) == FIRN_OK);
    CHILD_NEEDS(store.write_at(store.self, 0, bytes, sizeof bytes, &why) == (*broken ? FIRN_IO : FIRN_OK));
    CHILD_NEEDS(why == (*broken ? EPIPE : 0));
    store.close(store.self);
    close(ends[1]);
    return child > 0 ? scratch_wait(child) : 0;
}

static void pours(void **state)
{
    bool broken = false;

    (void)state;
    assert_int_equal(scratch_in_child(pour, &broken), 0);
    broken = true;
    assert_int_equal(scratch_in_child(pour, &broken), 0);
}

static void tells_when_a_device_is_full(void **state)
{
    int full = open("/dev/full", O_WRONLY), why = 0;
    struct firn_store store;

    (void)state;
    if (full < 0)
        skip();
    assert_int_equal(firn_store_pipe(full, memory, &store), FIRN_OK);
    assert_int_equal(store.write_at(store.self, 0, "x", 1, &why), FIRN_IO);
    assert_int_equal(why, ENOSPC);
    store.close(store.self);
    close(full);
}

/* --- memory --- */

static void keeps_memory_within_bounds(void **state)
{
    uint8_t bytes[9] = "........", copy[16];
    struct firn_store_buffer buffer = { bytes, 8, 0 };
    struct firn_store store;
    uint64_t size;
    size_t got;
    int why;

    (void)state;
    firn_store_memory(&buffer, &store);
    assert_int_equal(put(&store, 0, "ab"), FIRN_OK);
    assert_int_equal(put(&store, 4, "ef"), FIRN_OK);
    assert_int_equal(buffer.used, 6);
    assert_memory_equal(bytes, "ab\0\0ef..", 9);
    assert_int_equal(put(&store, 6, "ghi"), FIRN_IO);
    assert_int_equal(put(&store, UINT64_MAX, "x"), FIRN_IO);
    assert_int_equal(buffer.used, 6);
    assert_int_equal(store.read_at(store.self, 4, copy, sizeof copy, &got, &why), FIRN_OK);
    assert_int_equal(got, 2);
    assert_int_equal(store.read_at(store.self, UINT64_MAX, copy, sizeof copy, &got, &why), FIRN_OK);
    assert_int_equal(got, 0);
    assert_int_equal(store.resize(store.self, 3, &why), FIRN_OK);
    assert_int_equal(store.resize(store.self, 5, &why), FIRN_OK);
    assert_memory_equal(bytes, "ab\0\0\0f..", 9);
    assert_int_equal(store.resize(store.self, 9, &why), FIRN_IO);
    assert_int_equal(why, ENOSPC);
    assert_int_equal(store.size(store.self, &size, &why), FIRN_OK);
    assert_int_equal(size, 5);
    assert_int_equal(store.sync(store.self, &why), FIRN_OK);
    store.forget(store.self, 0, 5);
    store.close(store.self);
}

/* --- temporary files and spools --- */

static int use_temporary(void *self)
{
    struct firn_fault fault;
    struct firn_store store;
    unsigned before = scratch_entries();
    char text[4];
    size_t got;
    int why;

    CHILD_NEEDS(*(bool *)self || be_poor(false));
    CHILD_NEEDS(firn_store_temporary(scratch_path(""), memory, &store, &fault) == FIRN_OK);
    CHILD_NEEDS(scratch_entries() == before);
    CHILD_NEEDS(put(&store, 100000, "far") == FIRN_OK);
    CHILD_NEEDS(store.read_at(store.self, 100000, text, sizeof text, &got, &why) == FIRN_OK);
    CHILD_NEEDS(got == 3 && memcmp(text, "far", 3) == 0);
    store.close(store.self);
    CHILD_NEEDS(firn_store_temporary(scratch_path("nowhere"), memory, &store, &fault) == FIRN_CANNOT_CREATE);
    CHILD_NEEDS(fault.os_error == ENOENT && strstr(fault.what, "nowhere") != NULL);
    return 0;
}

static void has_temporary_files_without_names(void **state)
{
    bool rich = true, poor = false;

    (void)state;
    assert_int_equal(scratch_in_child(use_temporary, &rich), 0);
    assert_int_equal(scratch_in_child(use_temporary, &poor), 0);
}

enum { SPOOL_BYTES = 3000000 };

static void fill(uint8_t *bytes, size_t count)
{
    for (size_t i = 0; i < count; i++)
        bytes[i] = (uint8_t)(i * 7 + i / 251);
}

static int feed(int into)
{
    uint8_t *bytes = malloc(SPOOL_BYTES);
    size_t given = 0;
    ssize_t done = 1;

    if (bytes == NULL)
        return 1;
    fill(bytes, SPOOL_BYTES);
    for (; given < SPOOL_BYTES && done > 0; given += (size_t)done)
        done = write(into, bytes + given, SPOOL_BYTES - given);
    free(bytes);
    return done > 0 ? 0 : 1;
}

static void expect_spooled(struct firn_store *store)
{
    uint8_t *wanted = malloc(SPOOL_BYTES), *found = malloc(SPOOL_BYTES + 1);
    size_t got;
    int why;

    assert_true(wanted != NULL && found != NULL);
    fill(wanted, SPOOL_BYTES);
    assert_int_equal(store->read_at(store->self, 0, found, SPOOL_BYTES + 1, &got, &why), FIRN_OK);
    assert_int_equal(got, SPOOL_BYTES);
    assert_memory_equal(found, wanted, SPOOL_BYTES);
    free(wanted);
    free(found);
}

static void spools_a_pipe(void **state)
{
    struct firn_fault fault;
    struct firn_store store;
    int ends[2];
    pid_t child;

    (void)state;
    assert_int_equal(pipe(ends), 0);
    child = fork();
    assert_true(child >= 0);
    if (child == 0)
        _exit(feed(ends[1]));
    close(ends[1]);
    assert_int_equal(firn_store_spool(ends[0], NULL, memory, &store, &fault), FIRN_OK);
    assert_int_equal(scratch_wait(child), 0);
    expect_spooled(&store);
    store.close(store.self);
    close(ends[0]);
}

static void spools_a_file(void **state)
{
    struct firn_fault fault;
    struct firn_store store;
    int descriptor;
    char first;
    size_t got;
    int why;

    (void)state;
    descriptor = open(scratch_path("spooled"), O_RDWR | O_CREAT | O_TRUNC, 0600);
    assert_true(descriptor >= 0);
    assert_int_equal(feed(descriptor), 0);
    assert_int_equal(lseek(descriptor, 0, SEEK_SET), 0);
    assert_int_equal(firn_store_spool(descriptor, NULL, memory, &store, &fault), FIRN_OK);
    expect_spooled(&store);
    store.close(store.self);

    assert_int_equal(lseek(descriptor, 5, SEEK_SET), 5);      /* somebody has read the start: the rest is what counts */
    assert_int_equal(firn_store_spool(descriptor, NULL, memory, &store, &fault), FIRN_OK);
    assert_int_equal(store.read_at(store.self, 0, &first, 1, &got, &why), FIRN_OK);
    assert_int_equal(first, 35);
    store.close(store.self);
    close(descriptor);
}

struct listening { unsigned asked, stop_at; uint64_t told; };

static bool ask(void *self)
{
    struct listening *listening = self;

    return ++listening->asked == listening->stop_at;
}

static void hear(void *self, uint64_t at, uint64_t bytes)
{
    struct listening *listening = self;

    assert_int_equal(bytes, 0);
    assert_true(at >= listening->told);
    listening->told = at;
}

static void ring(int signal_number)
{
    (void)signal_number;
}

static void stops_a_spool(void **state)
{
    const struct sigaction ringing = { .sa_handler = ring };
    struct listening first = { .stop_at = 1 }, later = { .stop_at = 3 }, never = { .asked = 0 };
    struct firn_store_watch watch = { .self = &first, .progress = hear, .stop = ask };
    struct firn_fault fault = { 0 };
    struct firn_store store;
    int ends[2];

    (void)state;
    assert_int_equal(pipe(ends), 0);      /* nothing comes out of it, so nothing may be read */
    assert_int_equal(firn_store_spool(ends[0], &watch, memory, &store, &fault), FIRN_STOPPED);
    assert_int_equal(first.asked, 1);
    assert_int_equal(write(ends[1], "abc", 3), 3);
    assert_int_equal(sigaction(SIGALRM, &ringing, NULL), 0);
    assert_int_equal(alarm(1), 0);
    watch.self = &later;                  /* asked for the third time when the signal ends its waiting */
    assert_int_equal(firn_store_spool(ends[0], &watch, memory, &store, &fault), FIRN_STOPPED);
    assert_int_equal(later.told, 3);
    assert_int_equal(write(ends[1], "defg", 4), 4);
    close(ends[1]);
    watch.self = &never;
    assert_int_equal(firn_store_spool(ends[0], &watch, memory, &store, &fault), FIRN_OK);
    assert_int_equal(never.told, 4);
    store.close(store.self);
    close(ends[0]);
}

static void tells_a_spool_that_fails(void **state)
{
    int folder = open(scratch_path(""), O_RDONLY | O_DIRECTORY);
    struct firn_fault fault = { 0 };
    struct firn_store store;

    (void)state;
    assert_int_equal(firn_store_spool(folder, NULL, memory, &store, &fault), FIRN_IO);
    assert_int_equal(fault.os_error, EISDIR);
    close(folder);
}

/* --- beside a container --- */

static void finds_its_place_through_links(void **state)
{
    struct firn_fault fault;
    char *beside, real[PATH_MAX + 8];

    (void)state;
    scratch_write("core.firn", "abc", 3, 0644);
    assert_int_equal(symlink("core.firn", scratch_path("alias")), 0);
    assert_int_equal(firn_store_beside_path(scratch_path("alias"), ".mend", memory, &beside, &fault), FIRN_OK);
    assert_non_null(realpath(scratch_path("core.firn"), real));
    assert_string_equal(beside, strcat(real, ".mend"));
    memory->put(memory->self, beside);
    assert_int_equal(firn_store_beside_path(scratch_path("none"), ".mend", memory, &beside, &fault), FIRN_NO_INPUT);
    assert_int_equal(firn_store_beside_path("/dev/null", ".mend", memory, &beside, &fault), FIRN_CANNOT_CREATE);
    assert_null(beside);
}

/* What stands in the place of "core.mend", and what opening it says. */
static const struct beside_case {
    const char *name;
    enum { NOTHING, PLAIN, LINK, FIFO, FOLDER, LINKED_TWICE, SHARED } kind;
    enum firn_status status;
} beside_cases[] = {
    { "beside: nothing", NOTHING, FIRN_END },
    { "beside: a file", PLAIN, FIRN_OK },
    { "beside: a symbolic link", LINK, FIRN_BAD_DATA },
    { "beside: a fifo", FIFO, FIRN_BAD_DATA },
    { "beside: a folder", FOLDER, FIRN_BAD_DATA },
    { "beside: a file with another name", LINKED_TWICE, FIRN_BAD_DATA },
    { "beside: a file that others may write", SHARED, FIRN_BAD_DATA },
};

static void place_beside(unsigned kind)
{
    const char *path = scratch_path("core.mend");

    switch (kind) {
    case LINK:
        assert_int_equal(symlink("core.firn", path), 0);
        break;
    case FIFO:
        assert_int_equal(mkfifo(path, 0600), 0);
        break;
    case FOLDER:
        assert_int_equal(mkdir(path, 0700), 0);
        break;
    case PLAIN:
    case LINKED_TWICE:
    case SHARED:
        scratch_write("core.mend", "abc", 3, kind == SHARED ? 0666 : 0600);
        if (kind == LINKED_TWICE)
            assert_int_equal(link(path, scratch_path("twin")), 0);
        break;
    default:
        break;
    }
}

static void opens_beside(void **state)
{
    const struct beside_case *c = *state;
    struct firn_store container, store;
    struct firn_fault fault = { 0 };
    const char *path = scratch_path("core.mend");

    scratch_write("core.firn", "abc", 3, 0644);
    assert_int_equal(firn_store_open(scratch_path("core.firn"), FIRN_STORE_READ, memory, &container, &fault), FIRN_OK);
    place_beside(c->kind);
    assert_int_equal(firn_store_beside_open(path, &container, memory, &store, &fault), c->status);
    if (c->status == FIRN_OK)
        store.close(store.self);
    /* Whatever is there, a new one does not take its place. */
    assert_int_equal(firn_store_beside_make(path, memory, &store, &fault), c->kind == NOTHING ? FIRN_OK : FIRN_EXISTS);
    if (c->kind == NOTHING) {
        struct stat facts;

        assert_int_equal(stat(path, &facts), 0);
        assert_int_equal(facts.st_mode & 07777, 0600);
        store.close(store.self);
        assert_int_equal(firn_store_beside_settle(path, &fault), FIRN_OK);
    }
    container.close(container.self);
    assert_int_equal(remove(path), 0);
    (void)unlink(scratch_path("twin"));
}

static void believes_the_owner_of_the_container(void **state)
{
    enum { STRANGER = 54321 };
    struct firn_store container, store;
    struct firn_fault fault;
    const char *path = scratch_path("owned.mend");

    (void)state;
    if (geteuid() != 0)
        skip();      /* only root can give files away */
    scratch_write("owned.firn", "abc", 3, 0644);
    scratch_write("owned.mend", "abc", 3, 0600);
    assert_int_equal(chown(path, STRANGER, (gid_t)-1), 0);
    assert_int_equal(firn_store_open(scratch_path("owned.firn"), FIRN_STORE_READ, memory, &container, &fault), FIRN_OK);
    assert_int_equal(firn_store_beside_open(path, &container, memory, &store, &fault), FIRN_BAD_DATA);
    assert_int_equal(chown(scratch_path("owned.firn"), STRANGER, (gid_t)-1), 0);
    assert_int_equal(firn_store_beside_open(path, &container, memory, &store, &fault), FIRN_OK);
    store.close(store.self);
    container.close(container.self);
}

static int make_beside_unwritable(void *self)
{
    struct firn_fault fault = { 0 };
    struct firn_store store;

    (void)self;
    if (!scratch_be_nobody())
        return 77;
    CHILD_NEEDS(firn_store_beside_make(scratch_path("shut/core.mend"), memory, &store, &fault) == FIRN_CANNOT_CREATE);
    CHILD_NEEDS(fault.os_error == EACCES && strstr(fault.what, "shut/core.mend") != NULL);
    return 0;
}

static void tells_a_folder_that_cannot_be_written(void **state)
{
    int outcome;

    (void)state;
    assert_int_equal(mkdir(scratch_path("shut"), 0555), 0);
    outcome = scratch_in_child(make_beside_unwritable, NULL);
    if (outcome == 77)
        skip();
    assert_int_equal(outcome, 0);
}

static void removes(void **state)
{
    struct firn_fault fault = { 0 };

    (void)state;
    scratch_write("spent", "abc", 3, 0644);
    assert_int_equal(firn_store_remove(scratch_path("spent"), &fault), FIRN_OK);
    assert_int_equal(access(scratch_path("spent"), F_OK), -1);
    assert_int_equal(firn_store_remove(scratch_path("spent"), &fault), FIRN_OK);
    assert_int_equal(firn_store_remove(scratch_path("nowhere/spent"), &fault), FIRN_OK);
    assert_int_equal(mkdir(scratch_path("no file"), 0700), 0);
    assert_int_equal(firn_store_remove(scratch_path("no file"), &fault), FIRN_IO);
    assert_int_equal(fault.os_error, EISDIR);
}

/* --- memory that runs out --- */

static unsigned open_descriptors(void)
{
    unsigned open_ones = 0;

    for (int i = 0; i < 256; i++)
        open_ones += fcntl(i, F_GETFD) != -1;
    return open_ones;
}

static void gives_back_all_when_memory_is_out(void **state)
{
    struct fault_memory scarce;
    unsigned before = open_descriptors(), names = scratch_entries();
    struct firn_store_stage *stage;
    struct firn_fault fault;
    struct firn_store store;
    int ends[2];

    (void)state;
    fault_memory_make(&scarce, 1);
    assert_int_equal(firn_store_open("/etc/passwd", FIRN_STORE_READ, &scarce.memory, &store, &fault), FIRN_NO_MEMORY);
    fault_memory_make(&scarce, 1);
    assert_int_equal(firn_store_pipe(1, &scarce.memory, &store), FIRN_NO_MEMORY);
    fault_memory_make(&scarce, 1);
    assert_int_equal(firn_store_temporary(scratch_path(""), &scarce.memory, &store, &fault), FIRN_NO_MEMORY);
    fault_memory_make(&scarce, 1);
    assert_int_equal(firn_store_beside_make(scratch_path("scarce"), &scarce.memory, &store, &fault), FIRN_NO_MEMORY);
    for (unsigned nth = 1; nth <= 2; nth++) {
        fault_memory_make(&scarce, nth);
        assert_int_equal(firn_store_stage_open(scratch_path("scarce"), false, &scarce.memory, &stage, &fault),
                         FIRN_NO_MEMORY);
        assert_null(stage);
        assert_int_equal(scarce.outstanding, 0);
        fault_memory_make(&scarce, nth);
        assert_int_equal(pipe(ends), 0);
        assert_int_equal(firn_store_spool(ends[0], NULL, &scarce.memory, &store, &fault), FIRN_NO_MEMORY);
        assert_int_equal(scarce.outstanding, 0);
        close(ends[0]);
        close(ends[1]);
    }
    assert_int_equal(open_descriptors(), before);
    assert_int_equal(scratch_entries(), names);
}


static int start(void **state)
{
    (void)state;
    memory = firn_memory_system();
    scratch_make();
    return 0;
}

static int end(void **state)
{
    (void)state;
    scratch_remove();
    return 0;
}

static struct CMUnitTest row(const char *name, CMUnitTestFunction test, const void *state)
{
    return (struct CMUnitTest){ name, test, NULL, NULL, (void *)(uintptr_t)state };
}

#define ROWS(table) (sizeof table / sizeof table[0])

int main(void)
{
    static const struct CMUnitTest singles[] = {
        cmocka_unit_test(tells_read_only_from_absent), cmocka_unit_test(reads_and_writes_a_file),
        cmocka_unit_test(tells_what_was_read_before_an_error), cmocka_unit_test(knows_the_size_of_a_device),
        cmocka_unit_test(forgets), cmocka_unit_test(lends), cmocka_unit_test(locks_others_out),
        cmocka_unit_test(stages_a_long_name),
        cmocka_unit_test(gives_the_mode_that_umask_leaves), cmocka_unit_test(leaves_no_trace_when_killed),
        cmocka_unit_test(tells_when_full), cmocka_unit_test(writes_a_pipe_in_order), cmocka_unit_test(pours),
        cmocka_unit_test(tells_when_a_device_is_full), cmocka_unit_test(keeps_memory_within_bounds),
        cmocka_unit_test(has_temporary_files_without_names), cmocka_unit_test(spools_a_pipe),
        cmocka_unit_test(spools_a_file), cmocka_unit_test(stops_a_spool), cmocka_unit_test(tells_a_spool_that_fails),
        cmocka_unit_test(finds_its_place_through_links), cmocka_unit_test(believes_the_owner_of_the_container),
        cmocka_unit_test(tells_a_folder_that_cannot_be_written), cmocka_unit_test(removes),
        cmocka_unit_test(gives_back_all_when_memory_is_out),
    };
    struct CMUnitTest tests[ROWS(singles) + ROWS(open_cases) + 2 * ROWS(stage_cases) + ROWS(refused_cases)
                            + ROWS(beside_cases)];
    size_t count = ROWS(singles);

    memcpy(tests, singles, sizeof singles);
    for (size_t i = 0; i < ROWS(open_cases); i++)
        tests[count++] = row(open_cases[i].name, opens, &open_cases[i]);
    for (size_t i = 0; i < ROWS(stage_cases); i++) {
        tests[count++] = row(stage_cases[i].name, stages, &stage_cases[i]);
        tests[count++] = row(stage_cases[i].name, stages_with_temporary_names, &stage_cases[i]);
    }
    for (size_t i = 0; i < ROWS(refused_cases); i++)
        tests[count++] = row(refused_cases[i].name, refuses_a_stage, &refused_cases[i]);
    for (size_t i = 0; i < ROWS(beside_cases); i++)
        tests[count++] = row(beside_cases[i].name, opens_beside, &beside_cases[i]);
    return cmocka_run_group_tests_name("store", tests, start, end);
}
