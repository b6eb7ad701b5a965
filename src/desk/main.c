/* desk/main.c - finds the command and runs it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"
#include "desk/interrupt.h"
#include "desk/trouble.h"

#include <stdio.h>
#include <string.h>

static const struct firn_command *const commands[] = {
    &firn_command_pack, &firn_command_restore, &firn_command_scrub, &firn_command_inventory, &firn_command_describe,
    &firn_command_manifest, &firn_command_collate, &firn_command_drill, &firn_command_forecast, &firn_command_label,
};

static void help(FILE *out)
{
    fputs("firn " FIRN_VERSION_TEXT
          " - packs collections for years on a shelf: dense, self-healing, self-describing\n\n"
          "usage: firn COMMAND [options] ...\n\n",
          out);
    for (size_t i = 0; i < sizeof commands / sizeof commands[0]; i++)
        fprintf(out, "  %-10s %s\n", commands[i]->name, commands[i]->summary);
    fputs("\n'firn COMMAND --help' tells the rest. A scrub that finds nothing prints nothing.\n"
          "Exit status: 0 intact or done; 1 damage found, every byte safe; 2 bytes are lost;\n"
          "64 and up as in sysexits.h.\n", out);
}

static const struct firn_command *find(const char *name)
{
    for (size_t i = 0; i < sizeof commands / sizeof commands[0]; i++)
        if (strcmp(commands[i]->name, name) == 0)
            return commands[i];
    return NULL;
}

/* What was printed must have arrived: a report on a full disk is a failure too. */
static int finish_output(const struct firn_view *view, int exit)
{
    if (fflush(stdout) == 0 && !ferror(stdout))
        return exit;
    fprintf(stderr, "firn %s: standard output: cannot be written; check where it goes\n", view->command);
    return exit == FIRN_EXIT_SOUND || exit == FIRN_EXIT_SAFE ? FIRN_EXIT_IO : exit;
}

int main(int argc, char **argv)
{
    const struct firn_command *command;
    struct firn_args args;
    struct firn_view view;
    int exit = FIRN_EXIT_SOUND;

    if (argc > 1 && (strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "-h") == 0)) {
        help(stdout);
        return FIRN_EXIT_SOUND;
    }
    if (argc > 1 && strcmp(argv[1], "--version") == 0) {
        puts("firn " FIRN_VERSION_TEXT ", container format 1");
        return FIRN_EXIT_SOUND;
    }
    command = argc > 1 ? find(argv[1]) : NULL;
    if (command == NULL) {
        if (argc > 1)
            fprintf(stderr, "firn: %s: is not a command; see 'firn --help'\n", argv[1]);
        else
            help(stderr);
        return FIRN_EXIT_USAGE;
    }
    firn_interrupt_listen();
    if (firn_args_read(command, argc - 1, argv + 1, &args) != FIRN_OK) {
        firn_args_free(&args);
        return FIRN_EXIT_USAGE;
    }
    firn_view_make(&view, command->name, args.json, args.quiet);
    if (args.help)
        firn_args_help(command);
    else
        exit = command->run(&args, &view);
    exit = finish_output(&view, exit);
    firn_args_free(&args);
    firn_interrupt_obey();
    return exit;
}
