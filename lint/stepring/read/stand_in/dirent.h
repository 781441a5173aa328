/* Stand-in for <dirent.h> (POSIX). */
#ifndef STEPRING_DIRENT_H
#define STEPRING_DIRENT_H
#include <sys/types.h>
typedef struct stepring_directory { int stepring_state; } DIR;
struct dirent { ino_t d_ino; unsigned char d_type; char d_name[256]; };
DIR *opendir (const char *path);
struct dirent *readdir (DIR *directory);
int closedir (DIR *directory);
#endif
