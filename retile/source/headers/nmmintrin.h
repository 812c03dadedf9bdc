/* <nmmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_NMMINTRIN_H
#define RETILE_NMMINTRIN_H
#include <immintrin.h>
#endif
