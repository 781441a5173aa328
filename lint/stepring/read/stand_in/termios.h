/* Stand-in for <termios.h> (POSIX). */
#ifndef STEPRING_TERMIOS_H
#define STEPRING_TERMIOS_H
typedef unsigned int tcflag_t;
typedef unsigned char cc_t;
typedef unsigned int speed_t;
#define NCCS 32
struct termios {
  tcflag_t c_iflag;
  tcflag_t c_oflag;
  tcflag_t c_cflag;
  tcflag_t c_lflag;
  cc_t c_cc[NCCS];
};
#define IGNBRK 0x1UL
#define BRKINT 0x2UL
#define IGNPAR 0x4UL
#define PARMRK 0x8UL
#define INPCK 0x10UL
#define ISTRIP 0x20UL
#define INLCR 0x40UL
#define IGNCR 0x80UL
#define ICRNL 0x100UL
#define IXON 0x200UL
#define IXOFF 0x400UL
#define OPOST 0x800UL
#define ONLCR 0x1000UL
#define CREAD 0x2000UL
#define PARENB 0x4000UL
#define PARODD 0x8000UL
#define HUPCL 0x10000UL
#define CLOCAL 0x20000UL
#define CSTOPB 0x40000UL
#define CRTSCTS 0x80000UL
#define ISIG 0x100000UL
#define ICANON 0x200000UL
#define ECHO 0x400000UL
#define ECHOE 0x800000UL
#define ECHOK 0x1000000UL
#define ECHONL 0x2000000UL
#define NOFLSH 0x4000000UL
#define IEXTEN 0x8000000UL
#define CSIZE 0x60000000UL
#define CS5 0x00000000UL
#define CS6 0x20000000UL
#define CS7 0x40000000UL
#define CS8 0x60000000UL
#define B0 0
#define B300 1
#define B600 2
#define B1200 3
#define B2400 4
#define B4800 5
#define B9600 6
#define B19200 7
#define B38400 8
#define B57600 9
#define B115200 10
#define B230400 11
#define VTIME 5
#define VMIN 6
#define TCSANOW 0
#define TCSADRAIN 1
#define TCSAFLUSH 2
#define TCIFLUSH 0
#define TCOFLUSH 1
#define TCIOFLUSH 2
int tcgetattr (int descriptor, struct termios *place);
int tcsetattr (int descriptor, int when, const struct termios *place);
int tcflush (int descriptor, int queue);
int tcdrain (int descriptor);
int cfsetispeed (struct termios *place, speed_t speed);
int cfsetospeed (struct termios *place, speed_t speed);
void cfmakeraw (struct termios *place);
#endif
