/* <smmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_SMMINTRIN_H
#define RETILE_SMMINTRIN_H
#include <immintrin.h>
#endif
