/* Macros of <stdalign.h> (C17 7.15). */
#ifndef RETILE_STDALIGN_H
#define RETILE_STDALIGN_H
#define alignas _Alignas
#define alignof _Alignof
#endif
