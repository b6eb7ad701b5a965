/* desk/events.c - what was done to which container, told as preservation events */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/events.h"

#include "desk/json.h"

#include <pwd.h>
#include <stdlib.h>
#include <string.h>
#include <sys/random.h>
#include <time.h>
#include <unistd.h>

enum { UUID_BYTES = 16, UUID_ROOM = 37, HOST_ROOM = 256 };

const char *firn_events_term(enum firn_events_type type)
{
    static const char *const terms[] = {
        [FIRN_EVENTS_PACKING] = "packing", [FIRN_EVENTS_DIGEST_CALCULATION] = "message digest calculation",
        [FIRN_EVENTS_FIXITY_CHECK] = "fixity check", [FIRN_EVENTS_RECOVERY] = "recovery",
        [FIRN_EVENTS_UNPACKING] = "unpacking", [FIRN_EVENTS_REPLICATION] = "replication"
    };

    return terms[type];
}

/* A random UUID: RFC 4122, section 4.4. */
static void make_uuid(char words[UUID_ROOM])
{
    uint8_t bytes[UUID_BYTES];
    struct firn_text text;

    if (getrandom(bytes, sizeof bytes, 0) != (ssize_t)sizeof bytes)
        memset(bytes, 0, sizeof bytes);      /* the nil UUID says that there is none */
    else {
        bytes[6] = (uint8_t)((bytes[6] & 0x0F) | 0x40);
        bytes[8] = (uint8_t)((bytes[8] & 0x3F) | 0x80);
    }
    firn_text_start(&text, words, UUID_ROOM);
    for (size_t i = 0; i < UUID_BYTES; i++) {
        if (i == 4 || i == 6 || i == 8 || i == 10)
            firn_text_add(&text, "-");
        firn_text_add_hex(&text, bytes + i, 1);
    }
}

static void put(FILE *line, const char *before, const char *words)
{
    fputs(before, line);
    (void)firn_json_string(line, words);
}

static void put_agent(FILE *line, const char *type, const char *value, const char *role)
{
    put(line, "{\"linkingAgentIdentifierType\":", type);
    put(line, ",\"linkingAgentIdentifierValue\":", value);
    put(line, ",\"linkingAgentRole\":", role);
    fputc('}', line);
}

static void put_agents(FILE *line)
{
    const struct passwd *account = getpwuid(geteuid());
    char host[HOST_ROOM] = "", words[HOST_ROOM + 100];
    struct firn_text text;

    (void)gethostname(host, sizeof host - 1);
    firn_text_start(&text, words, sizeof words);
    if (account != NULL)
        firn_text_add(&text, "%.60s", account->pw_name);
    else
        firn_text_add(&text, "%lu", (unsigned long)geteuid());
    firn_text_add(&text, "@%s", host);
    fputs(",\"linkingAgentIdentifier\":[", line);
    put_agent(line, "software", "firn " FIRN_VERSION_TEXT, "executing program");
    fputc(',', line);
    put_agent(line, "account", words, "implementer");
    fputc(']', line);
}

static void put_object(FILE *line, const char *type, const char *value, const char *role)
{
    put(line, "{\"linkingObjectIdentifierType\":", type);
    put(line, ",\"linkingObjectIdentifierValue\":", value);
    put(line, ",\"linkingObjectRole\":", role);
    fputc('}', line);
}

/* A path from the root says the same tomorrow, wherever the next run is started. */
static void put_path(FILE *line, const char *path, const char *role)
{
    char *whole = strcmp(path, "-") == 0 ? NULL : realpath(path, NULL);

    put_object(line, "path", whole != NULL ? whole : path, role);
    free(whole);
}

static void put_objects(FILE *line, const struct firn_events_event *event)
{
    const char *role = event->made ? "outcome" : "source", *other = event->made ? "source" : "outcome";

    fputs(",\"linkingObjectIdentifier\":[", line);
    put_path(line, event->container, role);
    if (event->id != NULL) {
        char words[17];
        struct firn_text text;

        firn_text_start(&text, words, sizeof words);
        firn_text_add_hex(&text, event->id, 8);
        fputc(',', line);
        put_object(line, "firn container identity", words, role);
    }
    for (size_t i = 0; i < event->other_count; i++) {
        fputc(',', line);
        put_path(line, event->others[i], other);
    }
    fputc(']', line);
}

static void put_fixity(FILE *line, const uint8_t *sha256)
{
    char words[65];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add_hex(&text, sha256, 32);
    fputs(",\"fixity\":{\"messageDigestAlgorithm\":\"SHA-256\"", line);
    put(line, ",\"messageDigest\":", words);
    put(line, ",\"messageDigestOriginator\":", "firn " FIRN_VERSION_TEXT);
    fputc('}', line);
}

void firn_events_tell(struct firn_lines *events, const struct firn_events_event *event)
{
    static const char *const outcomes[] = {
        [FIRN_EVENTS_SUCCESS] = "success", [FIRN_EVENTS_FAILURE] = "failure", [FIRN_EVENTS_UNKNOWN] = "unknown"
    };
    FILE *line = firn_lines_begin(events);
    char uuid[UUID_ROOM], when[32] = "";
    time_t now = time(NULL);
    struct tm utc;

    if (line == NULL)
        return;
    make_uuid(uuid);
    if (gmtime_r(&now, &utc) != NULL)
        strftime(when, sizeof when, "%Y-%m-%dT%H:%M:%SZ", &utc);
    put(line, "{\"eventIdentifier\":{\"eventIdentifierType\":\"UUID\",\"eventIdentifierValue\":", uuid);
    put(line, "},\"eventType\":", firn_events_term(event->type));
    put(line, ",\"eventDateTime\":", when);
    if (event->detail != NULL) {
        put(line, ",\"eventDetailInformation\":{\"eventDetail\":", event->detail);
        fputc('}', line);
    }
    put(line, ",\"eventOutcomeInformation\":{\"eventOutcome\":", outcomes[event->outcome]);
    if (event->note != NULL) {
        put(line, ",\"eventOutcomeDetail\":{\"eventOutcomeDetailNote\":", event->note);
        fputc('}', line);
    }
    fputc('}', line);
    put_agents(line);
    put_objects(line, event);
    if (event->catalogue_sha256 != NULL)
        put_fixity(line, event->catalogue_sha256);
    fputs("}\n", line);
    firn_lines_end(events, line);
}
