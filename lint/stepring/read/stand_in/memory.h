/* Stand-in for <memory.h>: the older name of <string.h>. */
#include <string.h>
