/* Stand-in: see cmsis_compiler.h. */
#include <cmsis_compiler.h>
