/* Vector types of the x86 intrinsics; their functions stay undeclared, so that nothing is claimed about them. */
#ifndef RETILE_IMMINTRIN_H
#define RETILE_IMMINTRIN_H
typedef float __m64 __attribute__((vector_size(8)));
typedef float __m128 __attribute__((vector_size(16)));
typedef float __m128d __attribute__((vector_size(16)));
typedef float __m128i __attribute__((vector_size(16)));
typedef float __m256 __attribute__((vector_size(32)));
typedef float __m256d __attribute__((vector_size(32)));
typedef float __m256i __attribute__((vector_size(32)));
typedef float __m512 __attribute__((vector_size(64)));
typedef float __m512d __attribute__((vector_size(64)));
typedef float __m512i __attribute__((vector_size(64)));
typedef unsigned char __mmask8;
typedef unsigned short __mmask16;
typedef unsigned int __mmask32;
typedef unsigned long long __mmask64;
#define _MM_SHUFFLE(z, y, x, w) (((z) << 6) | ((y) << 4) | ((x) << 2) | (w))
#define _MM_HINT_T0 3
#define _MM_HINT_T1 2
#define _MM_HINT_T2 1
#define _MM_HINT_NTA 0
#endif
