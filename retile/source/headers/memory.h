/* <memory.h>: declared in <string.h>. */
#ifndef RETILE_MEMORY_H
#define RETILE_MEMORY_H
#include <string.h>
#endif
