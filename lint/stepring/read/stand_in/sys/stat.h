/* Stand-in for <sys/stat.h> (POSIX). */
#ifndef STEPRING_SYS_STAT_H
#define STEPRING_SYS_STAT_H
#include <sys/types.h>
struct stat {
  dev_t st_dev;
  ino_t st_ino;
  mode_t st_mode;
  nlink_t st_nlink;
  uid_t st_uid;
  gid_t st_gid;
  off_t st_size;
  time_t st_atime;
  time_t st_mtime;
  time_t st_ctime;
};
#define S_IRUSR 0400
#define S_IWUSR 0200
#define S_IXUSR 0100
#define S_IRWXU 0700
#define S_ISDIR(mode) (((mode) & 0170000) == 0040000)
#define S_ISREG(mode) (((mode) & 0170000) == 0100000)
int stat (const char *path, struct stat *place);
int fstat (int descriptor, struct stat *place);
int mkdir (const char *path, mode_t mode);
int chmod (const char *path, mode_t mode);
#endif
