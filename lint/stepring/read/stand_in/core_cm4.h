/* Stand-in for the CMSIS processor header: see cmsis_core_stand_in.h. */
#include <cmsis_core_stand_in.h>
