/*
 * desk/args.h - the words of a command line, sorted by a command's own table of options
 *
 * Room: desk. GNU long options, some with a letter; `--` ends them; `-` is an operand.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_ARGS_H
#define FIRN_DESK_ARGS_H

#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>

struct firn_args_option {
    const char *name;          /* without the dashes */
    char letter;               /* or '\0' */
    const char *value;         /* what its value is called in the help; NULL for a switch */
    const char *help;
};

enum { FIRN_ARGS_OPTIONS_MAX = 40 };

/* Options that every command has stand behind its own: their numbers begin at the command's option_count. */
enum firn_args_common { FIRN_ARGS_THREADS, FIRN_ARGS_JSON, FIRN_ARGS_QUIET, FIRN_ARGS_HELP, FIRN_ARGS_COMMON_COUNT };

struct firn_args;
struct firn_view;

struct firn_command {
    const char *name;
    const char *summary;       /* one line */
    const char *usage;         /* behind "firn NAME " */
    const char *about;         /* a paragraph or two, wrapped by hand at 78 columns */
    const char *example;       /* lines */
    const struct firn_args_option *options;
    size_t option_count;
    /* returns the exit status */
    int (*run)(const struct firn_args *args, struct firn_view *view);
};

struct firn_args {
    const struct firn_command *command;
    bool given[FIRN_ARGS_OPTIONS_MAX];
    const char *values[FIRN_ARGS_OPTIONS_MAX];       /* the last one given */
    const char **all_values;                         /* every value in the order given: some options may come often */
    int *all_options;                                /* and which option each belongs to */
    size_t all_count;
    const char *const *operands;
    size_t operand_count;
    unsigned threads;
    bool json, quiet, help;
};

/*
 * Sorts argv[1 ..] (argv[0] is the command's name). On anything but FIRN_OK one line about what is wrong went to
 * standard error. The arrays inside are freed by firn_args_free.
 */
enum firn_status firn_args_read(const struct firn_command *command, int argc, char **argv, struct firn_args *args);
void firn_args_free(struct firn_args *args);

/* Values given to one option, gathered into list (room for all_count); returns how many. */
size_t firn_args_list(const struct firn_args *args, int option, const char **list);

/* Prints usage, options and example of a command. */
void firn_args_help(const struct firn_command *command);

#endif
