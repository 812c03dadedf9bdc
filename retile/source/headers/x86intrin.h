/* <x86intrin.h>: the types are those of <immintrin.h>. */
#ifndef RETILE_X86INTRIN_H
#define RETILE_X86INTRIN_H
#include <immintrin.h>
#endif
