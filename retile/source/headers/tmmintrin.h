/* <tmmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_TMMINTRIN_H
#define RETILE_TMMINTRIN_H
#include <immintrin.h>
#endif
