/* What a module keeps for good, for `make size` to measure. */
#include "../tw_frame.h"
#include "../tw_memory.h"
#include "../tw_seal.h"

struct kept {
    tw_reader reader;
    tw_memory memory;
    tw_gate gate;
    tw_counter counter;
};

extern struct kept state;
struct kept state = {.memory = {.boot = 1}};
