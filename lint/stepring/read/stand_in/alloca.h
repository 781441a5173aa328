/* Stand-in for <alloca.h>. */
#define alloca(size) __builtin_alloca (size)
