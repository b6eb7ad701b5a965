/* transfer/bag.c - a BagIt bag, checked as a bag while it is taken in */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/bag.h"

#include "base/fault.h"
#include "base/memory.h"
#include "base/text.h"
#include "transfer/manifest_lines.h"
#include "transfer/names.h"
#include "transfer/quietly.h"
#include "transfer/stored_name.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

enum { SHA256, SHA512, SHA1, MD5, ALGORITHMS, DIGEST_MAX = 64, WORDS_ROOM = 100, WHAT_ROOM = 200 };

/* Names as RFC 8493 writes them in the names of manifests. */
static const struct { const char *name; size_t bytes; unsigned asked; } algorithms[ALGORITHMS] = {
    [SHA256] = { "sha256", 32, 0 }, [SHA512] = { "sha512", 64, FIRN_INTAKE_SHA512 },
    [SHA1] = { "sha1", 20, FIRN_INTAKE_SHA1 }, [MD5] = { "md5", 16, FIRN_INTAKE_MD5 }
};

struct digests { uint8_t of[ALGORITHMS][DIGEST_MAX]; };

/* A path that is listed, or a file that was taken in, or both. */
struct entry {
    unsigned payload, tag;         /* manifests that list it, a bit for each algorithm */
    bool to_fetch;                 /* fetch.txt says where it was to be had */
    bool seen, proved;             /* taken in; its digests are known */
    uint64_t bytes;
    struct digests listed, found;
};

struct firn_bag {
    const struct firn_memory *memory;
    const char *path;                        /* as given; while its tag files are read */
    struct firn_names *entries;
    char stored[FIRN_STORED_NAME_ROOM];      /* the stored name of its folder */
    size_t stored_bytes;
    unsigned major;                          /* version */
    bool version_told, encoding_told;
    unsigned payload, tag;                   /* manifests that it has */
    bool oxum_told;
    uint64_t oxum_octets, oxum_files;
    char known[WORDS_ROOM], unknown[WORDS_ROOM];
};

static bool starts_with(const char *words, const char *start)
{
    return strncmp(words, start, strlen(start)) == 0;
}

static bool is_payload(const char *path)
{
    return starts_with(path, "data/");
}

/* ---- manifests ---- */

struct listing {
    struct firn_bag *bag;
    unsigned algorithm;
    bool tag;
};

/* The record of a path in a tag file, which must stay inside the bag. */
static enum firn_status enter(struct firn_bag *bag, char *path, struct entry **entry, const char **fault)
{
    char stored[FIRN_STORED_NAME_ROOM];
    bool dots;
    void *record;
    enum firn_status status;

    firn_manifest_lines_decode(path, false);
    if (path[0] == '/' || path[0] == '~' || firn_stored_name_make(path, stored, &dots) != FIRN_OK || dots
        || stored[0] == '\0') {
        *fault = "a path that leads out of the bag, or is none";
        return FIRN_BAD_DATA;
    }
    status = firn_names_add(bag->entries, stored, strlen(stored), &record, NULL);
    *entry = record;
    return status;
}

static enum firn_status take_manifest_line(void *self, char *line, const char **fault)
{
    struct listing *listing = self;
    size_t digits = strcspn(line, " \t"), bytes = algorithms[listing->algorithm].bytes;
    unsigned bit = 1U << listing->algorithm;
    uint8_t digest[DIGEST_MAX];
    struct entry *entry;
    enum firn_status status;
    unsigned *lists;
    char *path = line + digits + strspn(line + digits, " \t");

    if (digits != 2 * bytes || firn_text_parse_hex(line, bytes, digest) != FIRN_OK || path[0] == '\0') {
        *fault = "a line that is not a digest and a path";
        return FIRN_BAD_DATA;
    }
    path += path[0] == '*';      /* the mark of some tools for binary mode; no path of a bag begins so */
    status = enter(listing->bag, path, &entry, fault);
    if (status != FIRN_OK)
        return status;
    lists = listing->tag ? &entry->tag : &entry->payload;
    if (((entry->payload | entry->tag) & bit) != 0
        && memcmp(entry->listed.of[listing->algorithm], digest, bytes) != 0) {
        *fault = "a path listed twice with different digests";
        return FIRN_BAD_DATA;
    }
    *lists |= bit;
    memcpy(entry->listed.of[listing->algorithm], digest, bytes);
    return FIRN_OK;
}

/* ---- other tag files ---- */

static enum firn_status take_declaration(void *self, char *line, const char **fault)
{
    struct firn_bag *bag = self;
    unsigned major, minor;
    int end = 0;

    if (starts_with(line, "\xEF\xBB\xBF"))      /* a byte order mark, which must not be there; no harm is done */
        line += 3;
    if (!bag->version_told && sscanf(line, "BagIt-Version: %4u.%4u%n", &major, &minor, &end) == 2
        && line[end] == '\0') {
        bag->version_told = true;
        bag->major = major;
        return FIRN_OK;
    }
    if (bag->version_told && strcmp(line, "Tag-File-Character-Encoding: UTF-8") == 0) {
        bag->encoding_told = true;
        return FIRN_OK;
    }
    *fault = "neither BagIt-Version nor Tag-File-Character-Encoding: UTF-8";
    return FIRN_BAD_DATA;
}

/* Labels are case-insensitive; of all of them one matters here. */
static enum firn_status take_info(void *self, char *line, const char **fault)
{
    static const char label[] = "payload-oxum:";
    struct firn_bag *bag = self;
    int end = 0;

    for (size_t i = 0; i < sizeof label - 1; i++)
        if ((line[i] >= 'A' && line[i] <= 'Z' ? line[i] - 'A' + 'a' : line[i]) != label[i])
            return FIRN_OK;
    if (bag->oxum_told || sscanf(line + sizeof label - 1, " %19" SCNu64 ".%19" SCNu64 " %n", &bag->oxum_octets,
                                 &bag->oxum_files, &end) != 2 || line[sizeof label - 1 + (size_t)end] != '\0') {
        *fault = "a Payload-Oxum that is no OCTETS.FILES, or a second one";
        return FIRN_BAD_DATA;
    }
    bag->oxum_told = true;
    return FIRN_OK;
}

/* URL, length, path. */
static enum firn_status take_fetch(void *self, char *line, const char **fault)
{
    struct firn_bag *bag = self;
    struct entry *entry;
    enum firn_status status;
    char *at = line;

    for (unsigned field = 0; field < 2; field++) {
        at += strcspn(at, " \t");
        at += strspn(at, " \t");
    }
    if (*at == '\0') {
        *fault = "no URL, length and path";
        return FIRN_BAD_DATA;
    }
    status = enter(bag, at, &entry, fault);
    if (status == FIRN_OK)
        entry->to_fetch = true;
    return status;
}

/* ---- the folder ---- */

/* The path first, cut if it must be, so that what is wrong is never cut off. */
static enum firn_status complain(const struct firn_bag *bag, enum firn_status status, int os_error, uint64_t line,
                                 const char *name, const char *why, struct firn_fault *fault)
{
    char what[WHAT_ROOM];
    struct firn_text text;

    firn_text_start(&text, what, sizeof what);
    firn_text_add(&text, "%.70s/%.30s: ", bag->path, name);
    firn_text_add_bytes(&text, why, strlen(why));
    return firn_fault_tell(fault, status, os_error, line, what);
}

/* FIRN_END when there is no such file. */
static enum firn_status read_tag_file(struct firn_bag *bag, int folder, const char *name,
                                      firn_manifest_lines_taker *take, void *self, struct firn_fault *fault)
{
    struct firn_fault own = { 0 };
    enum firn_status status;
    int file = firn_quietly_open(folder, name, O_RDONLY);

    if (file < 0)
        return errno == ENOENT ? FIRN_END : complain(bag, FIRN_IO, errno, 0, name, "cannot be opened", fault);
    status = firn_manifest_lines_read(file, bag->memory, take, self, &own);
    close(file);
    if (status == FIRN_OK)
        return FIRN_OK;
    return complain(bag, status, own.os_error, status == FIRN_BAD_DATA ? own.at : 0, name, own.what, fault);
}

static void add_word(char words[WORDS_ROOM], const char *word, size_t bytes)
{
    struct firn_text text = { .at = words, .room = WORDS_ROOM, .used = strlen(words) };

    firn_text_add(&text, "%s%.*s", text.used > 0 ? ", " : "", (int)bytes, word);
}

/* "manifest-sha256.txt" and "tagmanifest-sha256.txt"; other names are passed over. */
static enum firn_status take_name(struct firn_bag *bag, int folder, const char *name, struct firn_fault *fault)
{
    struct listing listing = { .bag = bag, .algorithm = SHA256, .tag = starts_with(name, "tagmanifest-") };
    const char *word = name + (listing.tag ? strlen("tagmanifest-") : strlen("manifest-"));
    size_t bytes = strlen(name), word_bytes;

    if ((!listing.tag && !starts_with(name, "manifest-")) || bytes < 5 || strcmp(name + bytes - 4, ".txt") != 0)
        return FIRN_OK;
    word_bytes = strlen(word) - 4;
    for (; listing.algorithm < ALGORITHMS; listing.algorithm++)
        if (strlen(algorithms[listing.algorithm].name) == word_bytes
            && strncmp(algorithms[listing.algorithm].name, word, word_bytes) == 0)
            break;
    if (listing.algorithm == ALGORITHMS) {
        if (!listing.tag)
            add_word(bag->unknown, word, word_bytes);
        return FIRN_OK;
    }
    if (listing.tag) {
        bag->tag |= 1U << listing.algorithm;
    } else {
        bag->payload |= 1U << listing.algorithm;
        add_word(bag->known, word, word_bytes);
    }
    return read_tag_file(bag, folder, name, take_manifest_line, &listing, fault);
}

static enum firn_status read_manifests(struct firn_bag *bag, int folder, struct firn_fault *fault)
{
    int again = fcntl(folder, F_DUPFD_CLOEXEC, 0);
    DIR *names = again < 0 ? NULL : fdopendir(again);
    enum firn_status status = FIRN_OK;
    struct dirent *name;

    if (names == NULL) {
        status = complain(bag, FIRN_IO, errno, 0, "", "cannot be read", fault);
        if (again >= 0)
            close(again);
        return status;
    }
    while (status == FIRN_OK && (name = readdir(names)) != NULL)
        status = take_name(bag, folder, name->d_name, fault);
    closedir(names);
    if (status == FIRN_OK && bag->payload == 0)
        status = complain(bag, FIRN_BAD_DATA, 0, 0, "bagit.txt",
                          bag->unknown[0] == '\0' ? "a bag without a payload manifest"
                                                  : "a bag with no payload manifest that can be checked here", fault);
    return status;
}

static enum firn_status read_all(struct firn_bag *bag, int folder, struct firn_fault *fault)
{
    enum firn_status status = read_tag_file(bag, folder, "bagit.txt", take_declaration, bag, fault);

    if (status == FIRN_OK && !(bag->version_told && bag->encoding_told))
        status = complain(bag, FIRN_BAD_DATA, 0, 0, "bagit.txt", "lacks one of the two lines that make a bag", fault);
    if (status == FIRN_OK)
        status = read_manifests(bag, folder, fault);
    if (status == FIRN_OK)
        status = read_tag_file(bag, folder, "bag-info.txt", take_info, bag, fault);
    if (status == FIRN_OK || status == FIRN_END)
        status = read_tag_file(bag, folder, "fetch.txt", take_fetch, bag, fault);
    return status == FIRN_END ? FIRN_OK : status;
}

enum firn_status firn_bag_open(const char *path, const struct firn_memory *memory, struct firn_fault *fault,
                               struct firn_bag **out)
{
    int folder = open(path, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    struct firn_bag *bag;
    enum firn_status status;

    *out = NULL;
    if (folder < 0 || faccessat(folder, "bagit.txt", F_OK, 0) != 0) {
        if (folder >= 0)
            close(folder);
        return FIRN_OK;
    }
    bag = firn_memory_get_zeroed(memory, 1, sizeof *bag);
    status = bag == NULL ? FIRN_NO_MEMORY : FIRN_OK;
    if (status == FIRN_OK) {
        bag->memory = memory;
        bag->path = path;
        (void)firn_stored_name_make(path, bag->stored, NULL);
        bag->stored_bytes = strlen(bag->stored);
        status = firn_names_make(memory, sizeof(struct entry), &bag->entries);
    }
    if (status == FIRN_NO_MEMORY)
        (void)firn_fault_tell(fault, status, 0, 0, path);
    if (status == FIRN_OK)
        status = read_all(bag, folder, fault);
    close(folder);
    if (status != FIRN_OK) {
        firn_bag_free(bag);
        return status;
    }
    *out = bag;
    return FIRN_OK;
}

void firn_bag_free(struct firn_bag *bag)
{
    if (bag == NULL)
        return;
    firn_names_free(bag->entries);
    bag->memory->put(bag->memory->self, bag);
}

unsigned firn_bag_digests(const struct firn_bag *bag)
{
    unsigned asked = 0;

    for (unsigned i = 0; i < ALGORITHMS; i++)
        if (((bag->payload | bag->tag) & 1U << i) != 0)
            asked |= algorithms[i].asked;
    return asked;
}

/* ---- items ---- */

/* The path inside the bag of a stored name, or NULL. */
static const char *inside(const struct firn_bag *bag, const char *name)
{
    if (!firn_stored_name_within(name, bag->stored, bag->stored_bytes))
        return NULL;
    return bag->stored_bytes == 0 ? name : name[bag->stored_bytes] == '/' ? name + bag->stored_bytes + 1 : NULL;
}

static void keep_digests(struct entry *entry, const struct firn_intake_item *item)
{
    entry->proved = true;
    entry->bytes = item->bytes;
    memcpy(entry->found.of[SHA256], item->sha256, algorithms[SHA256].bytes);
    if (item->digests == NULL)
        return;
    memcpy(entry->found.of[SHA512], item->digests->sha512, sizeof item->digests->sha512);
    memcpy(entry->found.of[SHA1], item->digests->sha1, sizeof item->digests->sha1);
    memcpy(entry->found.of[MD5], item->digests->md5, sizeof item->digests->md5);
}

/* A hard link has the digests of the file it leads to, if that is of this bag: files come before links to them. */
static void follow(const struct firn_bag *bag, struct entry *entry, const char *target)
{
    const char *path = inside(bag, target);
    const struct entry *file = path == NULL ? NULL : firn_names_find(bag->entries, path, strlen(path));

    if (file == NULL || !file->proved)
        return;
    entry->proved = true;
    entry->bytes = file->bytes;
    entry->found = file->found;
}

enum firn_status firn_bag_see(struct firn_bag *bag, const struct firn_intake_item *item)
{
    const char *path = item->operand_bytes == bag->stored_bytes ? inside(bag, item->name) : NULL;
    struct entry *entry;
    void *record;
    enum firn_status status;

    if (path == NULL || (!item->has_content && item->link == NULL))
        return FIRN_OK;
    status = firn_names_add(bag->entries, path, strlen(path), &record, NULL);
    if (status != FIRN_OK)
        return status;
    entry = record;
    entry->seen = true;
    if (item->has_content)
        keep_digests(entry, item);
    else
        follow(bag, entry, item->link);
    return FIRN_OK;
}

/* ---- the verdict ---- */

struct judging {
    struct firn_bag *bag;
    void (*finding)(void *self, const struct firn_bag_finding *finding);
    void *self;
    struct firn_bag_report *report;
};

static void tell(const struct judging *j, enum firn_bag_kind kind, const char *path, const char *detail)
{
    const struct firn_bag_finding finding = { kind, path, detail };

    j->report->findings[kind]++;
    j->report->valid = false;
    if (j->finding != NULL)
        j->finding(j->self, &finding);
}

static void judge_digests(const struct judging *j, const char *path, const struct entry *entry)
{
    if (!entry->proved) {
        tell(j, FIRN_BAG_UNPROVED, path, "");
        return;
    }
    for (unsigned i = 0; i < ALGORITHMS; i++)
        if (((entry->payload | entry->tag) & 1U << i) != 0
            && memcmp(entry->listed.of[i], entry->found.of[i], algorithms[i].bytes) != 0)
            tell(j, FIRN_BAG_MISMATCH, path, algorithms[i].name);
}

/* From version 1.0 on each manifest lists the whole payload; before, all together did. */
static void judge_listing(const struct judging *j, const char *path, const struct entry *entry)
{
    if (j->bag->major < 1 && entry->payload == 0)
        tell(j, FIRN_BAG_UNLISTED, path, "");
    for (unsigned i = 0; i < ALGORITHMS && j->bag->major >= 1; i++)
        if ((j->bag->payload & ~entry->payload & 1U << i) != 0)
            tell(j, FIRN_BAG_UNLISTED, path, algorithms[i].name);
}

static void judge_entry(const struct judging *j, const char *path, const struct entry *entry)
{
    if (!entry->seen) {
        if ((entry->payload | entry->tag) != 0 || entry->to_fetch)
            tell(j, FIRN_BAG_MISSING, path, entry->to_fetch ? "fetch.txt tells where it was to be had" : "");
        return;
    }
    if ((entry->payload | entry->tag) != 0)
        judge_digests(j, path, entry);
    if (!is_payload(path))
        return;
    judge_listing(j, path, entry);
    j->report->files++;
    j->report->bytes += entry->bytes;
}

void firn_bag_finish(struct firn_bag *bag, void (*finding)(void *self, const struct firn_bag_finding *finding),
                     void *self, struct firn_bag_report *report)
{
    const struct judging j = { bag, finding, self, report };
    char words[WORDS_ROOM];

    *report = (struct firn_bag_report){ .valid = true, .algorithms = bag->known, .unknown = bag->unknown };
    for (size_t i = 0; i < firn_names_count(bag->entries); i++) {
        const char *path;
        const struct entry *entry = firn_names_at(bag->entries, i, &path);

        judge_entry(&j, path, entry);
    }
    if (!bag->oxum_told || (bag->oxum_octets == report->bytes && bag->oxum_files == report->files))
        return;
    (void)snprintf(words, sizeof words, "%" PRIu64 ".%" PRIu64 ", but it is %" PRIu64 ".%" PRIu64, bag->oxum_octets,
                   bag->oxum_files, report->bytes, report->files);
    tell(&j, FIRN_BAG_OXUM, "bag-info.txt", words);
}
