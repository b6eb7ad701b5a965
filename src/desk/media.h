/*
 * desk/media.h - the file of media profiles: where it lies, and what is in it
 *
 * Room: desk. The format is that of firn/forecast.h.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_MEDIA_H
#define FIRN_DESK_MEDIA_H

#include "desk/view.h"
#include "firn/forecast.h"

struct firn_media {
    char path[4096];
    char *text;
    size_t bytes;
};

/*
 * Reads the file named, or with NULL the first that is there of: firn/media.txt under XDG_DATA_HOME (else
 * ~/.local/share), share/firn/media.txt beside the folder this program lies in, firn/media.txt under each of
 * XDG_DATA_DIRS (else /usr/local/share and /usr/share). Returns FIRN_EXIT_SOUND, or says why not; then nothing is kept.
 */
int firn_media_read(struct firn_media *media, const char *path, struct firn_view *view);
void firn_media_free(struct firn_media *media);

/* The profile of that name. FIRN_EXIT_SOUND, or says why not: the whole file must be in order. */
int firn_media_find(const struct firn_media *media, const char *name, struct firn_view *view,
                    struct firn_forecast_profile *profile);

/* A line for each profile, or with JSON an object with all its figures and sources. */
int firn_media_list(const struct firn_media *media, struct firn_view *view);

#endif
