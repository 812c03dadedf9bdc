/* <wmmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_WMMINTRIN_H
#define RETILE_WMMINTRIN_H
#include <immintrin.h>
#endif
