/* <xmmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_XMMINTRIN_H
#define RETILE_XMMINTRIN_H
#include <immintrin.h>
#endif
