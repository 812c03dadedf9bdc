/* <pmmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_PMMINTRIN_H
#define RETILE_PMMINTRIN_H
#include <immintrin.h>
#endif
