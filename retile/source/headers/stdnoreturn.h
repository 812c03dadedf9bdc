/* Macro of <stdnoreturn.h> (C17 7.23). */
#ifndef RETILE_STDNORETURN_H
#define RETILE_STDNORETURN_H
#define noreturn _Noreturn
#endif
