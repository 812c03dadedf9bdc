/* <assert.h> (C17 7.2); assert itself follows NDEBUG each time it is included. */
#ifndef RETILE_ASSERT_H
#define RETILE_ASSERT_H
#include <retile_features.h>
#define static_assert _Static_assert
#endif
#undef assert
#ifdef NDEBUG
#define assert(condition) ((void)0)
#else
void __assert_failed__(void);
#define assert(condition) ((condition) ? (void)0 : __assert_failed__())
#endif
