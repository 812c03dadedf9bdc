/* Macros of <errno.h> (C17 7.5) and the usual numbers. */
#ifndef RETILE_ERRNO_H
#define RETILE_ERRNO_H
#include <retile_features.h>
extern int errno;
#define EPERM 1
#define ENOENT 2
#define EINTR 4
#define EIO 5
#define EAGAIN 11
#define ENOMEM 12
#define EACCES 13
#define EFAULT 14
#define EBUSY 16
#define EEXIST 17
#define ENOTDIR 20
#define EISDIR 21
#define EINVAL 22
#define ENOSPC 28
#define EPIPE 32
#define EDOM 33
#define ERANGE 34
#define ENOSYS 38
#define EILSEQ 84
#define EOVERFLOW 75
#define ENOTSUP 95
#define ETIMEDOUT 110
#endif
