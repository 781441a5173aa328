/* Stand-in for <assert.h> (ISO C N1570 7.2): read again at each inclusion, as NDEBUG may have changed. */
#undef assert
#ifdef NDEBUG
#define assert(condition) ((void)0)
#else
#define assert(condition) ((condition) ? (void)0 : stepring_assertion_failed ())
#endif
#ifndef STEPRING_ASSERT_H
#define STEPRING_ASSERT_H
_Noreturn void stepring_assertion_failed (void);
#define static_assert _Static_assert
#endif
