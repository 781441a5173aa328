/* Stand-in for <sys/mman.h> (POSIX). */
#ifndef STEPRING_SYS_MMAN_H
#define STEPRING_SYS_MMAN_H
#include <sys/types.h>
#define PROT_READ 1
#define PROT_WRITE 2
#define MAP_SHARED 1
#define MAP_PRIVATE 2
#define MAP_ANONYMOUS 32
#define MAP_FAILED ((void *)-1)
void *mmap (void *wanted, size_t size, int protection, int flags, int descriptor, off_t offset);
int munmap (void *place, size_t size);
#endif
