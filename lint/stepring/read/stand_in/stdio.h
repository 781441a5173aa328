/* Stand-in for <stdio.h> (ISO C N1570 7.21) with the usual POSIX functions. */
#ifndef STEPRING_STDIO_H
#define STEPRING_STDIO_H
#include <stddef.h>
#include <stdarg.h>
#include <sys/types.h>
typedef struct stepring_file { int stepring_state; } FILE;
typedef struct { long stepring_place; } fpos_t;
#define EOF (-1)
#define BUFSIZ 512
#define FILENAME_MAX 4096
#define FOPEN_MAX 16
#define L_tmpnam 20
#define TMP_MAX 10000
#define _IOFBF 0
#define _IOLBF 1
#define _IONBF 2
#define SEEK_SET 0
#define SEEK_CUR 1
#define SEEK_END 2
extern FILE *stdin;
extern FILE *stdout;
extern FILE *stderr;
int printf (const char *format, ...);
int fprintf (FILE *stream, const char *format, ...);
int sprintf (char *to, const char *format, ...);
int snprintf (char *to, size_t size, const char *format, ...);
int vprintf (const char *format, va_list arguments);
int vfprintf (FILE *stream, const char *format, va_list arguments);
int vsprintf (char *to, const char *format, va_list arguments);
int vsnprintf (char *to, size_t size, const char *format, va_list arguments);
int printf_P (const char *format, ...);
int sprintf_P (char *to, const char *format, ...);
int snprintf_P (char *to, size_t size, const char *format, ...);
int scanf (const char *format, ...);
int fscanf (FILE *stream, const char *format, ...);
int sscanf (const char *from, const char *format, ...);
int vsscanf (const char *from, const char *format, va_list arguments);
int getchar (void);
int getc (FILE *stream);
int fgetc (FILE *stream);
char *fgets (char *to, int size, FILE *stream);
int ungetc (int value, FILE *stream);
int putchar (int value);
int putc (int value, FILE *stream);
int fputc (int value, FILE *stream);
int puts (const char *text);
int fputs (const char *text, FILE *stream);
FILE *fopen (const char *name, const char *mode);
FILE *fdopen (int descriptor, const char *mode);
FILE *freopen (const char *name, const char *mode, FILE *stream);
FILE *popen (const char *command, const char *mode);
FILE *tmpfile (void);
int pclose (FILE *stream);
int fclose (FILE *stream);
int fflush (FILE *stream);
int fileno (FILE *stream);
size_t fread (void *to, size_t size, size_t count, FILE *stream);
size_t fwrite (const void *from, size_t size, size_t count, FILE *stream);
int fseek (FILE *stream, long offset, int whence);
long ftell (FILE *stream);
void rewind (FILE *stream);
int fgetpos (FILE *stream, fpos_t *place);
int fsetpos (FILE *stream, const fpos_t *place);
int feof (FILE *stream);
int ferror (FILE *stream);
void clearerr (FILE *stream);
void perror (const char *text);
void setbuf (FILE *stream, char *buffer);
int setvbuf (FILE *stream, char *buffer, int mode, size_t size);
int remove (const char *name);
int rename (const char *from, const char *to);
int dprintf (int descriptor, const char *format, ...);
#endif
