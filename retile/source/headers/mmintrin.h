/* <mmintrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_MMINTRIN_H
#define RETILE_MMINTRIN_H
#include <immintrin.h>
#endif
