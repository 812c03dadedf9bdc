/* <strings.h>: declared in <string.h>. */
#ifndef RETILE_STRINGS_H
#define RETILE_STRINGS_H
#include <string.h>
#endif
