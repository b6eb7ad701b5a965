/* transfer/outlet_metadata.c - giving something that was just made the metadata it had */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/outlet_metadata.h"

#include <errno.h>
#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

enum firn_status firn_outlet_metadata_start(struct firn_outlet_metadata *metadata, const struct firn_memory *memory,
                                            enum firn_outlet_owner owner)
{
    enum firn_status status;

    *metadata = (struct firn_outlet_metadata){ .owner = owner };
    status = firn_people_start(&metadata->people, owner != FIRN_OUTLET_OWNER_NUMBERS);
    return status == FIRN_OK ? firn_attributes_make(memory, &metadata->people, &metadata->attributes) : status;
}

void firn_outlet_metadata_end(struct firn_outlet_metadata *metadata)
{
    firn_attributes_free(metadata->attributes);
    metadata->attributes = NULL;
    firn_people_end(&metadata->people);
}

void firn_outlet_metadata_owner(struct firn_outlet_metadata *metadata, struct archive_entry *entry, int64_t *uid,
                                int64_t *gid)
{
    *uid = firn_people_number(&metadata->people, false, archive_entry_uname(entry), archive_entry_uid(entry));
    *gid = firn_people_number(&metadata->people, true, archive_entry_gname(entry), archive_entry_gid(entry));
}

static void fall_short(struct firn_outlet_shortfall *shortfall, const char *what, int os_error)
{
    if (shortfall->what == NULL)
        *shortfall = (struct firn_outlet_shortfall){ .what = what, .os_error = os_error };
}

static int set_owner(const struct firn_attributes_place *place, int64_t uid, int64_t gid)
{
    if (place->descriptor >= 0)
        return fchown(place->descriptor, (uid_t)uid, (gid_t)gid);
    return fchownat(place->folder, place->name, (uid_t)uid, (gid_t)gid, AT_SYMLINK_NOFOLLOW);
}

static int read_facts(const struct firn_attributes_place *place, struct stat *facts)
{
    if (place->descriptor >= 0)
        return fstat(place->descriptor, facts);
    return fstatat(place->folder, place->name, facts, AT_SYMLINK_NOFOLLOW);
}

/* Set-user-id and set-group-id lend the power of an owner: only of the one they were meant for. */
static mode_t allowed_mode(const struct firn_attributes_place *place, mode_t mode, int64_t uid, int64_t gid)
{
    struct stat facts;

    if ((mode & (S_ISUID | S_ISGID)) == 0)
        return mode;
    if (read_facts(place, &facts) != 0)
        return mode & (mode_t)~(S_ISUID | S_ISGID);
    if (facts.st_uid != (uid_t)uid)
        mode &= (mode_t)~S_ISUID;
    if (facts.st_gid != (gid_t)gid)
        mode &= (mode_t)~S_ISGID;
    return mode;
}

/* A symbolic link has no mode. What has no descriptor here is a device or a fifo that was made this moment. */
static int set_mode(const struct firn_attributes_place *place, mode_t mode)
{
    if (place->descriptor >= 0)
        return fchmod(place->descriptor, mode);
    return fchmodat(place->folder, place->name, mode, 0);
}

static int set_time(const struct firn_attributes_place *place, struct archive_entry *entry)
{
    const struct timespec times[2] = {
        { .tv_sec = 0, .tv_nsec = UTIME_OMIT },
        { .tv_sec = archive_entry_mtime(entry), .tv_nsec = archive_entry_mtime_nsec(entry) },
    };

    if (place->descriptor >= 0)
        return futimens(place->descriptor, times);
    return utimensat(place->folder, place->name, times, AT_SYMLINK_NOFOLLOW);
}

void firn_outlet_metadata_give(struct firn_outlet_metadata *metadata, const struct firn_attributes_place *place,
                               struct archive_entry *entry, struct firn_outlet_shortfall *shortfall)
{
    bool owned = metadata->owner != FIRN_OUTLET_OWNER_NONE;
    const char *which = "";
    int64_t uid, gid;
    int error;

    *shortfall = (struct firn_outlet_shortfall){ 0 };
    firn_outlet_metadata_owner(metadata, entry, &uid, &gid);
    if (owned && set_owner(place, uid, gid) != 0)
        fall_short(shortfall, "owner", errno);
    if (archive_entry_filetype(entry) != AE_IFLNK
        && set_mode(place, allowed_mode(place, archive_entry_perm(entry) & 07777, uid, gid)) != 0)
        fall_short(shortfall, "mode", errno);
    error = firn_attributes_give(metadata->attributes, place, entry, owned, &which);
    if (error != 0)
        fall_short(shortfall, which, error);
    if (archive_entry_mtime_is_set(entry) && set_time(place, entry) != 0)
        fall_short(shortfall, "time", errno);
}
