/* What the system's other headers expect from any header of the C library: feature macros and spellings. */
#ifndef RETILE_FEATURES_H
#define RETILE_FEATURES_H
#ifdef __has_include
#if __has_include(<features.h>)
#include <features.h>
#elif __has_include(<sys/cdefs.h>)
#include <sys/cdefs.h>
#endif
#endif
#endif
