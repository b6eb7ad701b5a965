/* desk/args.c - the words of a command line, sorted by a command's own table of options */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE      /* getopt_long, as the GNU Coding Standards ask for */
#include "desk/args.h"

#include "base/limits.h"
#include "base/text.h"

#include <getopt.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { THREADS_DEFAULT_MAX = 16 };

static const struct firn_args_option common[FIRN_ARGS_COMMON_COUNT] = {
    [FIRN_ARGS_THREADS] = { "threads", '\0', "N", "work with N threads (default: one for each processor, 16 at most)" },
    [FIRN_ARGS_JSON] = { "json", '\0', NULL, "report as JSON Lines on standard output" },
    [FIRN_ARGS_QUIET] = { "quiet", 'q', NULL, "say nothing but what is wrong" },
    [FIRN_ARGS_HELP] = { "help", 'h', NULL, "show this text" },
};

static const struct firn_args_option *option_at(const struct firn_command *command, size_t index)
{
    return index < command->option_count ? &command->options[index] : &common[index - command->option_count];
}

static unsigned default_threads(void)
{
    long processors = sysconf(_SC_NPROCESSORS_ONLN);

    if (processors < 1)
        return 1;
    return processors < THREADS_DEFAULT_MAX ? (unsigned)processors : THREADS_DEFAULT_MAX;
}

static enum firn_status complain(const struct firn_command *command, const char *word, const char *what)
{
    fprintf(stderr, "firn %s: %s: %s; see 'firn %s --help'\n", command->name, word, what, command->name);
    return FIRN_BAD_ARGUMENT;
}

/* The tables of getopt_long: value of a long option is its index + 256, so that letters stay apart. */
static void make_tables(const struct firn_command *command, struct option *longs, char *shorts)
{
    size_t count = command->option_count + FIRN_ARGS_COMMON_COUNT;

    *shorts++ = ':';      /* tell a missing value from an unknown option */
    for (size_t i = 0; i < count; i++) {
        const struct firn_args_option *option = option_at(command, i);

        longs[i] = (struct option){ .name = option->name,
                                    .has_arg = option->value != NULL ? required_argument : no_argument,
                                    .val = 256 + (int)i };
        if (option->letter != '\0') {
            *shorts++ = option->letter;
            if (option->value != NULL)
                *shorts++ = ':';
        }
    }
    longs[count] = (struct option){ .name = NULL };
    *shorts = '\0';
}

static int index_of(const struct firn_command *command, int got)
{
    if (got >= 256)
        return got - 256;
    for (size_t i = 0; i < command->option_count + FIRN_ARGS_COMMON_COUNT; i++)
        if (option_at(command, i)->letter == got)
            return (int)i;
    return -1;
}

static enum firn_status settle(struct firn_args *args)
{
    size_t base = args->command->option_count;
    const char *threads = args->values[base + FIRN_ARGS_THREADS];
    uint64_t count;

    args->json = args->given[base + FIRN_ARGS_JSON];
    args->quiet = args->given[base + FIRN_ARGS_QUIET];
    args->help = args->given[base + FIRN_ARGS_HELP];
    args->threads = default_threads();
    if (threads == NULL)
        return FIRN_OK;
    if (firn_text_parse_count(threads, &count) != FIRN_OK || count < 1 || count > FIRN_LIMIT_THREADS)
        return complain(args->command, threads, "is no number of threads from 1 to 256");
    args->threads = (unsigned)count;
    return FIRN_OK;
}

enum firn_status firn_args_read(const struct firn_command *command, int argc, char **argv, struct firn_args *args)
{
    struct option longs[FIRN_ARGS_OPTIONS_MAX + 1];
    char shorts[2 * FIRN_ARGS_OPTIONS_MAX + 2];
    int got;

    *args = (struct firn_args){ .command = command };
    args->all_values = calloc((size_t)argc + 1, sizeof args->all_values[0]);
    args->all_options = calloc((size_t)argc + 1, sizeof args->all_options[0]);
    if (args->all_values == NULL || args->all_options == NULL)
        return complain(command, "the command line", firn_status_text(FIRN_NO_MEMORY));
    make_tables(command, longs, shorts);
    opterr = 0;
    optind = 1;
    while ((got = getopt_long(argc, argv, shorts, longs, NULL)) != -1) {
        int index = got == '?' || got == ':' ? -1 : index_of(command, got);
        const char *word = argv[optind - 1];

        if (got == ':')
            return complain(command, word, "wants a value");
        if (index < 0)
            return complain(command, word, "is not an option here, or not one that takes a value");
        args->given[index] = true;
        if (optarg != NULL) {
            args->values[index] = optarg;
            args->all_values[args->all_count] = optarg;
            args->all_options[args->all_count++] = index;
        }
    }
    args->operands = (const char *const *)(argv + optind);
    args->operand_count = (size_t)(argc - optind);
    return settle(args);
}

void firn_args_free(struct firn_args *args)
{
    free(args->all_values);
    free(args->all_options);
    args->all_values = NULL;
    args->all_options = NULL;
}

size_t firn_args_list(const struct firn_args *args, int option, const char **list)
{
    size_t count = 0;

    for (size_t i = 0; i < args->all_count; i++)
        if (args->all_options[i] == option)
            list[count++] = args->all_values[i];
    return count;
}

void firn_args_help(const struct firn_command *command)
{
    printf("firn %s - %s\n\nusage: firn %s %s\n\n%s\noptions:\n", command->name, command->summary, command->name,
           command->usage, command->about);
    for (size_t i = 0; i < command->option_count + FIRN_ARGS_COMMON_COUNT; i++) {
        const struct firn_args_option *option = option_at(command, i);
        char words[64];
        struct firn_text text;

        firn_text_start(&text, words, sizeof words);
        if (option->letter != '\0')
            firn_text_add(&text, "-%c, ", option->letter);
        else
            firn_text_add(&text, "    ");
        firn_text_add(&text, "--%s%s%s", option->name, option->value != NULL ? " " : "",
                      option->value != NULL ? option->value : "");
        printf("  %-28s %s\n", words, option->help);
    }
    printf("\nexample:\n%s", command->example);
}
