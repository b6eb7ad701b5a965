/* desk/media.c - the file of media profiles: where it lies, and what is in it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/media.h"

#include "desk/trouble.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum { FILE_BYTES_MAX = 1 << 18, FOLDERS_MAX = 20 };

/* FIRN_OK, FIRN_NO_INPUT, FIRN_IO, FIRN_OVER_LIMIT, FIRN_NO_MEMORY */
static enum firn_status read_file(struct firn_media *media, struct firn_fault *fault)
{
    int file = open(media->path, O_RDONLY | O_CLOEXEC);
    enum firn_status status = FIRN_NO_INPUT;
    ssize_t got = -1;

    media->text = NULL;
    media->bytes = 0;
    if (file >= 0)
        media->text = malloc(FILE_BYTES_MAX + 1);
    if (file >= 0 && media->text != NULL)
        do {
            got = read(file, media->text + media->bytes, FILE_BYTES_MAX + 1 - media->bytes);
            if (got > 0)
                media->bytes += (size_t)got;
        } while ((got > 0 && media->bytes <= FILE_BYTES_MAX) || (got < 0 && errno == EINTR));
    fault->os_error = got < 0 ? errno : 0;
    if (file >= 0)
        status = media->text == NULL ? FIRN_NO_MEMORY : got < 0 ? FIRN_IO
               : media->bytes > FILE_BYTES_MAX ? FIRN_OVER_LIMIT : FIRN_OK;
    if (status != FIRN_OK)
        firn_media_free(media);
    if (file >= 0)
        close(file);
    return status;
}

/* Folders that are not absolute are ignored, as the XDG Base Directory specification 0.8 asks. */
static bool name_file(struct firn_media *media, const char *folder, size_t length, const char *rest)
{
    struct firn_text text;

    firn_text_start(&text, media->path, sizeof media->path);
    firn_text_add_bytes(&text, folder, length);
    firn_text_add(&text, "%s", rest);
    return length > 0 && folder[0] == '/' && !text.cut;
}

static bool is_there(struct firn_media *media, const char *folder, size_t length, const char *rest)
{
    return name_file(media, folder, length, rest) && access(media->path, F_OK) == 0;
}

static bool is_set(const char *words)
{
    return words != NULL && *words != '\0';
}

/* The prefix this program was installed to, wherever that was moved since. */
static bool beside_program(struct firn_media *media)
{
    char path[4096];
    ssize_t count = readlink("/proc/self/exe", path, sizeof path - 1);
    char *slash;

    if (count <= 0)
        return false;
    path[count] = '\0';
    slash = strrchr(path, '/');
    if (slash == NULL)
        return false;
    *slash = '\0';
    slash = strrchr(path, '/');
    return slash != NULL && is_there(media, path, (size_t)(slash - path), "/share/firn/media.txt");
}

static bool search(struct firn_media *media)
{
    const char *home = getenv("HOME"), *data = getenv("XDG_DATA_HOME"), *folders = getenv("XDG_DATA_DIRS");

    if (is_set(data) ? is_there(media, data, strlen(data), "/firn/media.txt")
                     : is_set(home) && is_there(media, home, strlen(home), "/.local/share/firn/media.txt"))
        return true;
    if (beside_program(media))
        return true;
    if (!is_set(folders))
        folders = "/usr/local/share:/usr/share";
    for (unsigned i = 0; i < FOLDERS_MAX && *folders != '\0'; i++) {
        size_t length = strcspn(folders, ":");

        if (is_there(media, folders, length, "/firn/media.txt"))
            return true;
        folders += length + (folders[length] == ':');
    }
    return false;
}

int firn_media_read(struct firn_media *media, const char *path, struct firn_view *view)
{
    struct firn_fault fault = { 0 };
    enum firn_status status;

    media->text = NULL;
    media->bytes = 0;
    if (path == NULL && !search(media)) {
        firn_view_finding(view, "no-input", "media.txt", "no file of media profiles was found; name one with "
                          "--media-file, or give the rates themselves without --medium");
        return FIRN_EXIT_NO_INPUT;
    }
    if (path != NULL) {
        if (strlen(path) >= sizeof media->path)
            return firn_trouble_usage(view, "--media-file", "its name is too long");
        memcpy(media->path, path, strlen(path) + 1);
    }
    status = read_file(media, &fault);
    return status == FIRN_OK ? FIRN_EXIT_SOUND : firn_trouble_tell(view, media->path, status, &fault);
}

void firn_media_free(struct firn_media *media)
{
    free(media->text);
    media->text = NULL;
    media->bytes = 0;
}

/* Every profile in turn, told to `tell`. */
static int each(const struct firn_media *media, struct firn_view *view,
                void (*tell)(void *self, const struct firn_forecast_profile *profile), void *self)
{
    struct firn_forecast_media at;
    struct firn_forecast_profile profile;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    firn_forecast_media_start(&at, media->text, media->bytes);
    while ((status = firn_forecast_media_next(&at, &profile, &fault)) == FIRN_OK)
        tell(self, &profile);
    return status == FIRN_END ? FIRN_EXIT_SOUND : firn_trouble_tell(view, media->path, status, &fault);
}

struct wanted {
    const char *name;
    struct firn_forecast_profile *profile;
    unsigned found;
};

static void look(void *self, const struct firn_forecast_profile *profile)
{
    struct wanted *wanted = self;

    if (strcmp(profile->name, wanted->name) != 0)
        return;
    *wanted->profile = *profile;
    wanted->found++;
}

int firn_media_find(const struct firn_media *media, const char *name, struct firn_view *view,
                    struct firn_forecast_profile *profile)
{
    struct wanted wanted = { .name = name, .profile = profile };
    int exit = each(media, view, look, &wanted);

    if (exit != FIRN_EXIT_SOUND || wanted.found == 1)
        return exit;
    if (wanted.found == 0)
        return firn_trouble_usage(view, name, "is no medium in the file of media profiles; --list-media shows them");
    firn_view_finding(view, "bad-data", name, "stands more than once in the file of media profiles; rename one");
    return FIRN_EXIT_BAD_DATA;
}

static void list(void *self, const struct firn_forecast_profile *profile)
{
    struct firn_view *view = self;
    struct firn_forecast_medium medium = profile->medium;

    if (!view->json) {
        fprintf(view->out, "%-16s %s\n", profile->name, profile->about);
        return;
    }
    firn_view_begin(view, "medium", NULL);
    firn_view_words(view, "medium", NULL, profile->name);
    firn_view_words(view, "about", NULL, profile->about);
    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++) {
        char field[40];
        struct firn_text text;

        firn_view_number(view, firn_forecast_figure_name(figure), *firn_forecast_figure(&medium, figure));
        firn_text_start(&text, field, sizeof field);
        firn_text_add(&text, "%s-source", firn_forecast_figure_name(figure));
        firn_view_words(view, field, NULL, profile->sources[figure]);
    }
    firn_view_end(view);
}

int firn_media_list(const struct firn_media *media, struct firn_view *view)
{
    int exit = each(media, view, list, view);

    if (exit == FIRN_EXIT_SOUND && !view->json)
        fprintf(view->out, "\nOrders of magnitude of a class, not of your medium; sources of the figures:\n%s\n",
                media->path);
    return exit;
}
