/* Stand-in for <syslog.h> (POSIX). */
#ifndef STEPRING_SYSLOG_H
#define STEPRING_SYSLOG_H
#define LOG_ERR 3
#define LOG_WARNING 4
#define LOG_NOTICE 5
#define LOG_INFO 6
#define LOG_DEBUG 7
#define LOG_DAEMON 24
void openlog (const char *name, int options, int facility);
void syslog (int priority, const char *format, ...);
void closelog (void);
#endif
