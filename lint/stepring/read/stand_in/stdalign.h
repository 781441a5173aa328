/* Stand-in for <stdalign.h> (ISO C N1570 7.15). */
#define alignas _Alignas
#define alignof _Alignof
#define __alignas_is_defined 1
#define __alignof_is_defined 1
