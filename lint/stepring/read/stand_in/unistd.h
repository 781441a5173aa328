/* Stand-in for <unistd.h> (POSIX). */
#ifndef STEPRING_UNISTD_H
#define STEPRING_UNISTD_H
#include <sys/types.h>
#define STDIN_FILENO 0
#define STDOUT_FILENO 1
#define STDERR_FILENO 2
#define F_OK 0
#define R_OK 4
#define W_OK 2
#define X_OK 1
#ifndef SEEK_SET
#define SEEK_SET 0
#define SEEK_CUR 1
#define SEEK_END 2
#endif
ssize_t read (int descriptor, void *to, size_t size);
ssize_t write (int descriptor, const void *from, size_t size);
int close (int descriptor);
off_t lseek (int descriptor, off_t offset, int whence);
int pipe (int pair[2]);
int dup (int descriptor);
int dup2 (int descriptor, int wanted);
int fsync (int descriptor);
int ftruncate (int descriptor, off_t size);
int isatty (int descriptor);
int access (const char *path, int mode);
int unlink (const char *path);
int rmdir (const char *path);
int chdir (const char *path);
char *getcwd (char *to, size_t size);
pid_t fork (void);
pid_t getpid (void);
pid_t getppid (void);
uid_t getuid (void);
int execv (const char *path, char *const arguments[]);
int execvp (const char *path, char *const arguments[]);
_Noreturn void _exit (int status);
unsigned int sleep (unsigned int seconds);
int usleep (useconds_t microseconds);
unsigned int alarm (unsigned int seconds);
int pause (void);
long sysconf (int name);
int getopt (int count, char *const arguments[], const char *options);
extern char *optarg;
extern int optind;
extern int opterr;
extern int optopt;
#endif
