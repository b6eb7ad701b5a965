/* tests/transfer/tree.c - two folders compared, and folders made for comparing */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* SEEK_DATA */
#include "transfer/tree.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/sysmacros.h>
#include <sys/xattr.h>
#include <unistd.h>

static void need(bool fine, const char *what)
{
    if (!fine) {
        perror(what);
        abort();
    }
}

/* ---- comparing ---- */

enum { PAIRS_MAX = 4096 };

/* Inodes of files with several names, to see that the same names belong together on both sides. */
struct comparing {
    unsigned differences, may_differ;
    struct { ino_t one, other; } pairs[PAIRS_MAX];
    unsigned pair_count;
};

static void differs(struct comparing *c, const char *path, const char *what)
{
    c->differences++;
    fprintf(stderr, "%s: %s differs\n", path, what);
}

static void compare_links(struct comparing *c, const char *path, const struct stat *one, const struct stat *other)
{
    if (one->st_nlink != other->st_nlink)
        differs(c, path, "number of links");
    for (unsigned i = 0; i < c->pair_count; i++)
        if (c->pairs[i].one == one->st_ino) {
            if (c->pairs[i].other != other->st_ino)
                differs(c, path, "hard link");
            return;
        }
    need(c->pair_count < PAIRS_MAX, "pairs");
    c->pairs[c->pair_count].one = one->st_ino;
    c->pairs[c->pair_count++].other = other->st_ino;
}

static void compare_attributes(struct comparing *c, const char *one, const char *other)
{
    static char list[2][65536], value[2][65536];
    ssize_t count = llistxattr(one, list[0], sizeof list[0]);

    if (count < 0 || count != llistxattr(other, list[1], sizeof list[1])) {
        if (count >= 0 || errno != ENOTSUP)
            differs(c, other, "list of attributes");
        return;
    }
    for (char *name = list[0]; name < list[0] + count; name += strlen(name) + 1) {
        ssize_t bytes = lgetxattr(one, name, value[0], sizeof value[0]);

        if (bytes != lgetxattr(other, name, value[1], sizeof value[1])
            || (bytes > 0 && memcmp(value[0], value[1], (size_t)bytes) != 0))
            differs(c, other, name);
    }
}

static void compare_bytes(struct comparing *c, const char *one, const char *other)
{
    static uint8_t bytes[2][1 << 16];
    int files[2] = { open(one, O_RDONLY), open(other, O_RDONLY) };
    off_t at[2] = { 0, 0 };
    ssize_t count;

    need(files[0] >= 0 && files[1] >= 0, other);
    while ((c->may_differ & TREE_ANY_HOLES) == 0) {
        at[0] = lseek(files[0], at[0], SEEK_DATA);
        at[1] = lseek(files[1], at[1], SEEK_DATA);
        if (at[0] != at[1])
            differs(c, other, "where data begins");
        if (at[0] != at[1] || at[0] < 0)
            break;
        at[0] = lseek(files[0], at[0], SEEK_HOLE);
        at[1] = lseek(files[1], at[1], SEEK_HOLE);
    }
    /* only where there is data, so that a file of many gigabytes of holes takes no time */
    at[0] = 0;
    while ((at[0] = lseek(files[0], at[0], SEEK_DATA)) >= 0) {
        count = pread(files[0], bytes[0], sizeof bytes[0], at[0]);
        need(count >= 0, one);
        if (count == 0)
            break;
        if (pread(files[1], bytes[1], (size_t)count, at[0]) != count ||
            memcmp(bytes[0], bytes[1], (size_t)count) != 0) {
            differs(c, other, "content");
            break;
        }
        at[0] += count;
    }
    close(files[0]);
    close(files[1]);
}

static void compare_facts(struct comparing *c, const char *one_path, const char *path, const struct stat *one,
                          const struct stat *other)
{
    char target[2][PATH_MAX] = { "", "" };

    if ((one->st_mode & S_IFMT) != (other->st_mode & S_IFMT)) {
        differs(c, path, "type");
        return;
    }
    if (one->st_mode != other->st_mode && (c->may_differ & TREE_ANY_MODE) == 0)
        differs(c, path, "mode");
    if ((one->st_uid != other->st_uid || one->st_gid != other->st_gid) && (c->may_differ & TREE_ANY_OWNER) == 0)
        differs(c, path, "owner");
    if (one->st_mtim.tv_sec != other->st_mtim.tv_sec || one->st_mtim.tv_nsec != other->st_mtim.tv_nsec)
        differs(c, path, "time of modification");
    if (!S_ISDIR(one->st_mode) && (one->st_nlink > 1 || other->st_nlink > 1))
        compare_links(c, path, one, other);
    if ((S_ISCHR(one->st_mode) || S_ISBLK(one->st_mode)) && one->st_rdev != other->st_rdev)
        differs(c, path, "device");
    if (S_ISLNK(one->st_mode)) {
        need(readlink(one_path, target[0], PATH_MAX - 1) >= 0 && readlink(path, target[1], PATH_MAX - 1) >= 0, path);
        if (strcmp(target[0], target[1]) != 0)
            differs(c, path, "target");
    }
    compare_attributes(c, one_path, path);
    if (S_ISREG(one->st_mode)) {
        if (one->st_size != other->st_size)
            differs(c, path, "size");
        else
            compare_bytes(c, one_path, path);
    }
}

static unsigned count_names(const char *path)
{
    DIR *list = opendir(path);
    unsigned count = 0;

    need(list != NULL, path);
    while (readdir(list) != NULL)
        count++;
    closedir(list);
    return count;
}

static void compare_folders(struct comparing *c, const char *one, const char *other)
{
    DIR *list = opendir(one);
    struct dirent *entry;

    need(list != NULL, one);
    if (count_names(one) != count_names(other))
        differs(c, other, "number of names");
    while ((entry = readdir(list)) != NULL) {
        size_t room = strlen(one) + strlen(other) + strlen(entry->d_name) + 4;
        char *paths[2] = { malloc(room), malloc(room) };
        struct stat facts[2];

        need(paths[0] != NULL && paths[1] != NULL, "malloc");
        (void)snprintf(paths[0], room, "%s/%s", one, entry->d_name);
        (void)snprintf(paths[1], room, "%s/%s", other, entry->d_name);
        if (strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0) {
            need(lstat(paths[0], &facts[0]) == 0, paths[0]);
            if (lstat(paths[1], &facts[1]) != 0) {
                differs(c, paths[1], "presence");
            } else {
                compare_facts(c, paths[0], paths[1], &facts[0], &facts[1]);
                if (S_ISDIR(facts[0].st_mode) && S_ISDIR(facts[1].st_mode))
                    compare_folders(c, paths[0], paths[1]);
            }
        }
        free(paths[0]);
        free(paths[1]);
    }
    closedir(list);
}

unsigned tree_differences(const char *one, const char *other, unsigned may_differ)
{
    struct comparing *c = calloc(1, sizeof *c);
    unsigned differences;

    need(c != NULL, "calloc");
    c->may_differ = may_differ;
    compare_folders(c, one, other);
    differences = c->differences;
    free(c);
    return differences;
}

/* ---- making ---- */

void tree_folder(const char *path, mode_t mode)
{
    need(mkdir(path, 0700) == 0 && chmod(path, mode) == 0, path);
}

void tree_file(const char *path, const void *bytes, size_t count, mode_t mode)
{
    int file = open(path, O_WRONLY | O_CREAT | O_TRUNC, 0600);

    need(file >= 0 && (count == 0 || write(file, bytes, count) == (ssize_t)count), path);
    need(fchmod(file, mode) == 0 && close(file) == 0, path);
}

void tree_pattern(const char *path, size_t count, unsigned seed)
{
    uint8_t *bytes = malloc(count + 8);
    uint64_t state = seed * 0x9E3779B97F4A7C15u + 1;

    need(bytes != NULL, "malloc");
    for (size_t i = 0; i < count; i++) {
        state = state * 6364136223846793005u + 1442695040888963407u;
        bytes[i] = (uint8_t)(state >> 56);
    }
    tree_file(path, bytes, count, 0644);
    free(bytes);
}

void tree_time(const char *path, long long seconds, long nanoseconds)
{
    const struct timespec times[2] = { { .tv_nsec = UTIME_OMIT }, { .tv_sec = seconds, .tv_nsec = nanoseconds } };

    need(utimensat(AT_FDCWD, path, times, AT_SYMLINK_NOFOLLOW) == 0, path);
}

static const char *in(const char *folder, const char *name)
{
    static char paths[4][PATH_MAX + NAME_MAX];
    static unsigned next;
    char *path = paths[next++ % 4];

    (void)snprintf(path, sizeof paths[0], "%s/%s", folder, name);
    return path;
}

static void make_sparse(const char *path)
{
    static const char word[] = "an island of data";
    int file = open(path, O_WRONLY | O_CREAT | O_TRUNC, 0644);

    need(file >= 0, path);
    need(pwrite(file, word, sizeof word, 1 << 20) > 0 && pwrite(file, word, sizeof word, 3 << 20) > 0, path);
    need(ftruncate(file, 9 << 20) == 0 && close(file) == 0, path);
}

/* user::rw-, user 1234:rwx, group::r--, mask::rwx, other::---: the kernel's form, linux/posix_acl_xattr.h */
static const uint8_t list[] = {
    2, 0, 0, 0,
    0x01, 0, 6, 0, 0xFF, 0xFF, 0xFF, 0xFF,
    0x02, 0, 7, 0, 0xD2, 0x04, 0, 0,
    0x04, 0, 4, 0, 0xFF, 0xFF, 0xFF, 0xFF,
    0x10, 0, 7, 0, 0xFF, 0xFF, 0xFF, 0xFF,
    0x20, 0, 0, 0, 0xFF, 0xFF, 0xFF, 0xFF,
};

/* cap_net_raw+ep, version 2 (linux/capability.h) */
static const uint8_t capability[] = { 1, 0, 0, 2, 0, 0x20, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0 };

static void make_privileged(const char *path)
{
    tree_file(in(path, "owned"), "x", 1, 0640);
    need(chown(in(path, "owned"), 1234, 5678) == 0, path);
    tree_file(in(path, "setuid"), "x", 1, 0755);
    need(chown(in(path, "setuid"), 1234, 5678) == 0 && chmod(in(path, "setuid"), 06755) == 0, path);
    tree_file(in(path, "capable"), "x", 1, 0755);
    need(setxattr(in(path, "capable"), "security.capability", capability, sizeof capability, 0) == 0, path);
    need(mknod(in(path, "null"), S_IFCHR | 0666, makedev(1, 3)) == 0 && chmod(in(path, "null"), 0666) == 0, path);
    need(mknod(in(path, "loop"), S_IFBLK | 0660, makedev(7, 200)) == 0, path);
    need(symlink("nowhere", in(path, "trusted-link")) == 0, path);
    need(lsetxattr(in(path, "trusted-link"), "trusted.note", "l", 1, 0) == 0, path);
    need(lchown(in(path, "trusted-link"), 3000000000u, 77) == 0, path);
}

void tree_of_everything(const char *path)
{
    static const char long_name[] =
        "0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
        "0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
        "0123456789012345678901234567890123456789012345678901234";

    tree_folder(path, 0755);
    tree_folder(in(path, "sub"), 0750);
    tree_folder(in(path, "sub/empty folder"), 01777);
    tree_file(in(path, "sub/empty"), "", 0, 0600);
    tree_file(in(path, "sub/hello.txt"), "hello\n", 6, 0644);
    tree_pattern(in(path, "sub/large"), 3000000, 1);
    tree_pattern(in(path, "sub/megabyte"), 1 << 20, 2);
    make_sparse(in(path, "sparse"));
    tree_file(in(path, "only a hole"), "", 0, 0644);
    need(truncate(in(path, "only a hole"), 1234567) == 0, path);
    need(symlink("sub/hello.txt", in(path, "link")) == 0, path);
    need(symlink("/nowhere\nat all \xE9", in(path, "broken link")) == 0, path);
    need(link(in(path, "sub/large"), in(path, "same as large")) == 0, path);
    need(link(in(path, "link"), in(path, "same link")) == 0, path);
    need(mkfifo(in(path, "fifo"), 0644) == 0 && chmod(in(path, "fifo"), 0622) == 0, path);
    tree_file(in(path, "new\nline \\ \x01 \xC3\xA9 e\xCC\x81 \xE1\x84\x80\xE1\x85\xA1"), "u", 1, 0644);
    tree_file(in(path, "latin \xE9 \xFF"), "l", 1, 0644);
    tree_file(in(path, "surrogate \xED\xA0\x80\xED\xB0\x80"), "s", 1, 0644);
    tree_file(in(path, long_name), "n", 1, 0444);
    tree_file(in(path, " "), "blank", 5, 0644);
    tree_file(in(path, "noted"), "x", 1, 0644);
    need(setxattr(in(path, "noted"), "user.note", "bytes\0\n=\xFF", 9, 0) == 0, path);
    need(setxattr(in(path, "noted"), "user.a=b% \xC3\xA9", "", 0, 0) == 0, path);
    tree_file(in(path, "plainly noted"), "x", 1, 0644);
    need(setxattr(in(path, "plainly noted"), "user.two", "2", 1, 0) == 0, path);
    need(setxattr(in(path, "plainly noted"), "user.one", "1\n22 path=evil\n", 15, 0) == 0, path);
    tree_file(in(path, "listed"), "x", 1, 0640);
    need(setxattr(in(path, "listed"), "system.posix_acl_access", list, sizeof list, 0) == 0, path);
    tree_folder(in(path, "listed folder"), 0755);
    need(setxattr(in(path, "listed folder"), "system.posix_acl_default", list, sizeof list, 0) == 0, path);
    if (geteuid() == 0)
        make_privileged(path);
    tree_time(in(path, "sub/hello.txt"), 1234567890, 987654321);
    tree_time(in(path, " "), -2, 500000000);
    tree_time(in(path, "noted"), 8589934592, 1);
    tree_time(in(path, "link"), 86400, 5);
    tree_time(in(path, "sub"), 1000000000, 999999999);
    tree_time(in(path, "sub/empty folder"), 0, 0);
}
