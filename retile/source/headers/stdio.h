/* Declarations of <stdio.h> (C17 7.21) and some of POSIX. */
#ifndef RETILE_STDIO_H
#define RETILE_STDIO_H
#include <retile_features.h>
#include <stddef.h>
#include <stdarg.h>
typedef struct __file__ FILE;
typedef long fpos_t;
typedef __INTPTR_TYPE__ ssize_t;
typedef long off_t;
extern FILE *stdin;
extern FILE *stdout;
extern FILE *stderr;
#define EOF (-1)
#define BUFSIZ 8192
#define FILENAME_MAX 4096
#define FOPEN_MAX 16
#define L_tmpnam 20
#define TMP_MAX 238328
#define SEEK_SET 0
#define SEEK_CUR 1
#define SEEK_END 2
#define _IOFBF 0
#define _IOLBF 1
#define _IONBF 2
int printf(const char *restrict, ...);
int fprintf(FILE *restrict, const char *restrict, ...);
int sprintf(char *restrict, const char *restrict, ...);
int snprintf(char *restrict, size_t, const char *restrict, ...);
int vprintf(const char *restrict, va_list);
int vfprintf(FILE *restrict, const char *restrict, va_list);
int vsprintf(char *restrict, const char *restrict, va_list);
int vsnprintf(char *restrict, size_t, const char *restrict, va_list);
int dprintf(int, const char *restrict, ...);
int scanf(const char *restrict, ...);
int fscanf(FILE *restrict, const char *restrict, ...);
int sscanf(const char *restrict, const char *restrict, ...);
int vsscanf(const char *restrict, const char *restrict, va_list);
FILE *fopen(const char *restrict, const char *restrict);
FILE *freopen(const char *restrict, const char *restrict, FILE *restrict);
FILE *fdopen(int, const char *);
FILE *popen(const char *, const char *);
FILE *tmpfile(void);
int pclose(FILE *);
int fclose(FILE *);
int fflush(FILE *);
int fileno(FILE *);
int setvbuf(FILE *restrict, char *restrict, int, size_t);
void setbuf(FILE *restrict, char *restrict);
size_t fread(void *restrict, size_t, size_t, FILE *restrict);
size_t fwrite(const void *restrict, size_t, size_t, FILE *restrict);
int fgetc(FILE *);
int getc(FILE *);
int getchar(void);
int ungetc(int, FILE *);
char *fgets(char *restrict, int, FILE *restrict);
int fputc(int, FILE *);
int putc(int, FILE *);
int putchar(int);
int fputs(const char *restrict, FILE *restrict);
int puts(const char *);
ssize_t getline(char **restrict, size_t *restrict, FILE *restrict);
int fseek(FILE *, long, int);
int fseeko(FILE *, off_t, int);
long ftell(FILE *);
off_t ftello(FILE *);
void rewind(FILE *);
int fgetpos(FILE *restrict, fpos_t *restrict);
int fsetpos(FILE *, const fpos_t *);
int feof(FILE *);
int ferror(FILE *);
void clearerr(FILE *);
void perror(const char *);
int remove(const char *);
int rename(const char *, const char *);
#endif
