/* Declarations of <locale.h> (C17 7.11). */
#ifndef RETILE_LOCALE_H
#define RETILE_LOCALE_H
#include <retile_features.h>
#define LC_ALL 6
#define LC_COLLATE 3
#define LC_CTYPE 0
#define LC_MONETARY 4
#define LC_NUMERIC 1
#define LC_TIME 2
#include <stddef.h>
struct lconv;
char *setlocale(int, const char *);
struct lconv *localeconv(void);
#endif
