/* Macros of <iso646.h> (C17 7.9). */
#ifndef RETILE_ISO646_H
#define RETILE_ISO646_H
#define and &&
#define and_eq &=
#define bitand &
#define bitor |
#define compl ~
#define not !
#define not_eq !=
#define or ||
#define or_eq |=
#define xor ^
#define xor_eq ^=
#endif
