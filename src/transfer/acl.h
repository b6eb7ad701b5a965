/*
 * transfer/acl.h - POSIX access control lists between the attributes the kernel keeps them in and libarchive's entries
 *
 * Room: transfer. The kernel gives a list as the value of the extended attribute system.posix_acl_access or
 * system.posix_acl_default, which works by descriptor, so that no path can be swapped underneath
 * (linux/posix_acl_xattr.h, version 2: a 32-bit version, then tag, permissions and id of each line, all little-endian).
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_ACL_H
#define FIRN_TRANSFER_ACL_H

#include "transfer/people.h"

#include <archive_entry.h>
#include <stddef.h>

#define FIRN_ACL_ACCESS "system.posix_acl_access"
#define FIRN_ACL_DEFAULT "system.posix_acl_default"

enum { FIRN_ACL_VALUE_MAX = 65536 };      /* the kernel's limit for any attribute value */

/* Adds the list to an entry. type: ARCHIVE_ENTRY_ACL_TYPE_ACCESS or _DEFAULT. On anything but FIRN_OK nothing
   is added: FIRN_BAD_DATA; FIRN_OVER_LIMIT: a user or group number from 2^31 on. */
enum firn_status firn_acl_take(struct archive_entry *entry, int type, const uint8_t *value, size_t value_bytes,
                               struct firn_people *people);

/*
 * Makes the attribute value of an entry's list, its lines in the order the kernel asks for.
 * value_bytes  out; 0: the entry has no such list. FIRN_OK; FIRN_OVER_LIMIT: too many lines.
 */
enum firn_status firn_acl_give(struct archive_entry *entry, int type, struct firn_people *people,
                               uint8_t value[FIRN_ACL_VALUE_MAX], size_t *value_bytes);

#endif
