/* Stand-in for <err.h>. */
#ifndef STEPRING_ERR_H
#define STEPRING_ERR_H
_Noreturn void err (int status, const char *format, ...);
_Noreturn void errx (int status, const char *format, ...);
void warn (const char *format, ...);
void warnx (const char *format, ...);
#endif
