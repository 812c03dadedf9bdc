/* <emmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_EMMINTRIN_H
#define RETILE_EMMINTRIN_H
#include <immintrin.h>
#endif
