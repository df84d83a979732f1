/* What a module keeps for good, for `make size` to measure. */
#include "../tw_module.h"

extern tw_module state;
tw_module state = {.part_us = 1};
