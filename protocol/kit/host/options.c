/* The command line: names, ranges, and what is said where one is wrong. */
#include <stdlib.h>
#include <string.h>

#include "host.h"

static const char usage[] =
    "usage: tw_host (--pty | --stdio) [--modules N] [--name NAME] [--kind KIND]\n"
    "    [--address A] [--identity I] [--seed N] [--keys FILE] [--store FILE] [--tally FILE]\n"
    "    [--loss P] [--repeat P]\n"
    "--pty: on a pseudo-terminal, whose path is the first line of output. --modules: how many,\n"
    "1 to 500; their addresses and identities are counted on from the first. --identity: bit 63 is\n"
    "set in any case. --store: a file that keeps what is kept over restarts. --tally: a line is\n"
    "added for each command as it is carried out. --loss, --repeat: of its own frames, 0 to 1.\n";

static int wrong(const char *what, const char *value)
{
    fprintf(stderr, "tw_host: %s: %s\n%s", what, value, usage);
    return 0;
}

static int whole_number(const char *word, uint64_t least, uint64_t most, uint64_t *value)
{
    char *end = NULL;
    *value = strtoull(word, &end, 0);
    return *word != '-' && end != word && *end == 0 && *value >= least && *value <= most;
}

static int part(const char *word, double *value)
{
    char *end = NULL;
    *value = strtod(word, &end);
    return end != word && *end == 0 && *value >= 0.0 && *value <= 1.0;
}

static int take_text(host_options *found, const char *name, const char *value)
{
    const struct {
        const char *name;
        const char **place;
    } texts[] = {{"--name", &found->name},
                 {"--kind", &found->kind},
                 {"--keys", &found->keys},
                 {"--store", &found->store},
                 {"--tally", &found->tally}};
    for (size_t at = 0; at < sizeof texts / sizeof *texts; at++) {
        if (strcmp(name, texts[at].name) == 0) {
            *texts[at].place = value;
            return 1;
        }
    }
    return 0;
}

/* 1: taken, 0: there is no such option, -1: its value is wrong. */
static int take_number(host_options *found, const char *name, const char *value)
{
    uint64_t number = 0;
    int good = 1;
    if (strcmp(name, "--modules") == 0) {
        good = whole_number(value, 1, MOST_MODULES, &number);
        found->modules = (unsigned)number;
    } else if (strcmp(name, "--address") == 0) {
        good = whole_number(value, TW_ADDRESS_FIRST_MODULE, TW_ADDRESS_LAST_MODULE, &number);
        found->address = (uint16_t)number;
    } else if (strcmp(name, "--identity") == 0) {
        good = whole_number(value, 0, UINT64_MAX, &found->identity);
    } else if (strcmp(name, "--seed") == 0) {
        good = whole_number(value, 0, UINT64_MAX, &found->seed);
    } else if (strcmp(name, "--loss") == 0) {
        good = part(value, &found->loss);
    } else if (strcmp(name, "--repeat") == 0) {
        good = part(value, &found->repeat);
    } else {
        return 0;
    }
    return good ? 1 : -1;
}

int read_options(int count, char **words, host_options *found)
{
    const host_options usual = {.pty = -1, .modules = 1, .name = "kit", .kind = "kit", .seed = 1,
                           .address = 0x0100, .identity = UINT64_C(0xC0DE00000100)};
    *found = usual;
    for (int at = 1; at < count; at++) {
        const char *name = words[at];
        if (strcmp(name, "--pty") == 0 || strcmp(name, "--stdio") == 0) {
            found->pty = strcmp(name, "--pty") == 0;
            continue;
        }
        if (++at >= count) {
            return wrong("no value, or no such option", name);
        }
        const int taken =
            take_text(found, name, words[at]) ? 1 : take_number(found, name, words[at]);
        if (taken <= 0) {
            return wrong(taken ? "out of its range" : "no such option", name);
        }
    }
    found->identity |= UINT64_C(1) << 63; /* simulated, wherever it goes */
    if (found->pty < 0) {
        return wrong("one is needed", "--pty or --stdio");
    }
    if (found->address + found->modules - 1u > TW_ADDRESS_LAST_MODULE) {
        return wrong("too many modules from there on", "--address");
    }
    return 1;
}
