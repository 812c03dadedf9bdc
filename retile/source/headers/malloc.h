/* <malloc.h>: what <stdlib.h> has not. */
#ifndef RETILE_MALLOC_H
#define RETILE_MALLOC_H
#include <stdlib.h>
void *memalign(size_t, size_t);
#endif
