/* What the parts of the checking program share. */
#ifndef CHECK_H
#define CHECK_H

#include <stddef.h>
#include <stdint.h>

#include "../tw_module.h"

#define MOST 4096

/* Read hexadecimal digits, or "-" for none; 1 where that is what they are. */
int bytes_of(const char *hex, uint8_t *out, size_t *length);
/* Whether bytes are these digits; an asterisk stands for any. */
int same(const uint8_t *left, size_t n, const char *hex);
uint32_t number_of(const char *word);

/* check_module.c: lines about a whole module. */
int run_allegiance(char **words);
int run_follows(char **words);
int run_module(char **words);
int run_hears(char **words);
int run_stops(char **words);
int run_notices(char **words);
int run_sticks(char **words);
int run_reports(char **words);

/* check_store.c: lines about what is kept, and traces. */
int run_store(char **words);
int run_tears(char **words);
int run_trace(char **words);

#endif
