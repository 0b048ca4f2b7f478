// Lets a program that runs under callgrind (a tool of Valgrind) say where a count begins and ends.
#include <valgrind/callgrind.h>

extern "C" void begin_count() { CALLGRIND_ZERO_STATS; }
extern "C" void end_count(const char* name) { CALLGRIND_DUMP_STATS_AT(name); }
extern "C" int is_counting() { return RUNNING_ON_VALGRIND; }
