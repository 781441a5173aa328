/* Stand-in for <sys/ioctl.h>. */
#ifndef STEPRING_SYS_IOCTL_H
#define STEPRING_SYS_IOCTL_H
int ioctl (int descriptor, unsigned long request, ...);
#endif
