/* examples/api/forecast_years.c - how likely a loss is over the years, for one to three copies, on a given medium */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/forecast.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Looks for a profile; the file share/firn/media.txt says what stands in one. */
static bool find(const char *path, const char *name, struct firn_forecast_profile *profile)
{
    static char text[1 << 16];
    FILE *file = fopen(path, "rb");
    size_t bytes = file != NULL ? fread(text, 1, sizeof text, file) : 0;
    struct firn_forecast_media media;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (file != NULL)
        fclose(file);
    firn_forecast_media_start(&media, text, bytes);
    do
        status = firn_forecast_media_next(&media, profile, &fault);
    while (status == FIRN_OK && strcmp(profile->name, name) != 0);
    if (status != FIRN_OK)
        fprintf(stderr, "forecast_years: %s: %s\n", path, status == FIRN_END ? "has no such medium" : fault.what);
    return status == FIRN_OK;
}

int main(int argc, char **argv)
{
    static const double years[] = { 1, 5, 10, 20, 50 };
    struct firn_forecast_profile profile;
    struct firn_forecast_plan plan = { .interval = 0.5, .replace = 1.0 / 12, .correlation = 0 };
    double gib = argc == 4 ? strtod(argv[3], NULL) : 0;

    if (!(gib > 0 && gib <= 1e9)) {
        fputs("usage: forecast_years MEDIA-FILE MEDIUM GIB\n", stderr);
        return 64;
    }
    plan.bytes = (uint64_t)(gib * (1 << 30));
    if (!find(argv[1], argv[2], &profile) ||
        firn_sheet_geometry_for(100.0 / 7, UINT64_C(128) << 20, &plan.geometry) != FIRN_OK)
        return 65;
    printf("%s\n%g GiB, looked at twice a year; log10 of the chance that anything is lost\n", profile.about, gib);
    puts("years  1 copy  2 copies  3 copies");
    for (size_t i = 0; i < sizeof years / sizeof years[0]; i++) {
        printf("%5g", years[i]);
        plan.years = years[i];
        for (plan.copies = 1; plan.copies <= 3; plan.copies++) {
            struct firn_forecast_result result;

            if (firn_forecast_run(&profile.medium, &plan, &result) != FIRN_OK)
                return 65;
            printf(" %8.3f", result.ln_lost[FIRN_FORECAST_ANY] / log(10));
        }
        putchar('\n');
    }
    puts("An order of magnitude: mistakes, fire, theft and ageing are not in it. Your institution's policy decides.");
    return 0;
}
