/* Declarations of <time.h> (C17 7.27) and some of POSIX. */
#ifndef RETILE_TIME_H
#define RETILE_TIME_H
#include <retile_features.h>
#include <stddef.h>
typedef long time_t;
typedef long clock_t;
typedef int clockid_t;
typedef void *timer_t;
#define CLOCKS_PER_SEC ((clock_t)1000000)
#define TIME_UTC 1
#define CLOCK_REALTIME 0
#define CLOCK_MONOTONIC 1
#define CLOCK_PROCESS_CPUTIME_ID 2
#define CLOCK_THREAD_CPUTIME_ID 3
#define CLOCK_MONOTONIC_RAW 4
struct timespec { time_t tv_sec; long tv_nsec; };
struct itimerspec { struct timespec it_interval, it_value; };
struct tm { int tm_sec, tm_min, tm_hour, tm_mday, tm_mon, tm_year, tm_wday, tm_yday, tm_isdst; long tm_gmtoff; const char *tm_zone; };
clock_t clock(void);
time_t time(time_t *);
double difftime(time_t, time_t);
time_t mktime(struct tm *);
int timespec_get(struct timespec *, int);
int clock_gettime(clockid_t, struct timespec *);
int clock_getres(clockid_t, struct timespec *);
int nanosleep(const struct timespec *, struct timespec *);
struct tm *gmtime(const time_t *);
struct tm *localtime(const time_t *);
struct tm *gmtime_r(const time_t *restrict, struct tm *restrict);
struct tm *localtime_r(const time_t *restrict, struct tm *restrict);
char *asctime(const struct tm *);
char *ctime(const time_t *);
size_t strftime(char *restrict, size_t, const char *restrict, const struct tm *restrict);
#endif
