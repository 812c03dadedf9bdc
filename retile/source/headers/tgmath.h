/* <tgmath.h> (C17 7.25): the functions keep the type of their double form here. */
#ifndef RETILE_TGMATH_H
#define RETILE_TGMATH_H
#include <math.h>
#include <complex.h>
#endif
