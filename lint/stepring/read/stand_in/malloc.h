/* Stand-in for <malloc.h>: the allocation functions of <stdlib.h>. */
#include <stdlib.h>
