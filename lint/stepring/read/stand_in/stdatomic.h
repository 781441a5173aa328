/* Stand-in for <stdatomic.h> (ISO C N1570 7.17); the operations are the compiler built-ins they stand for. */
#ifndef STEPRING_STDATOMIC_H
#define STEPRING_STDATOMIC_H
#include <stddef.h>
#include <stdint.h>
typedef enum {
  memory_order_relaxed,
  memory_order_consume,
  memory_order_acquire,
  memory_order_release,
  memory_order_acq_rel,
  memory_order_seq_cst
} memory_order;
typedef _Atomic _Bool atomic_bool;
typedef _Atomic char atomic_char;
typedef _Atomic signed char atomic_schar;
typedef _Atomic unsigned char atomic_uchar;
typedef _Atomic short atomic_short;
typedef _Atomic unsigned short atomic_ushort;
typedef _Atomic int atomic_int;
typedef _Atomic unsigned int atomic_uint;
typedef _Atomic long atomic_long;
typedef _Atomic unsigned long atomic_ulong;
typedef _Atomic long long atomic_llong;
typedef _Atomic unsigned long long atomic_ullong;
typedef _Atomic uint_least8_t atomic_uint_least8_t;
typedef _Atomic uint_least16_t atomic_uint_least16_t;
typedef _Atomic uint_least32_t atomic_uint_least32_t;
typedef _Atomic uint_fast8_t atomic_uint_fast8_t;
typedef _Atomic uint_fast16_t atomic_uint_fast16_t;
typedef _Atomic uint_fast32_t atomic_uint_fast32_t;
typedef _Atomic intptr_t atomic_intptr_t;
typedef _Atomic uintptr_t atomic_uintptr_t;
typedef _Atomic size_t atomic_size_t;
typedef _Atomic ptrdiff_t atomic_ptrdiff_t;
typedef _Atomic intmax_t atomic_intmax_t;
typedef _Atomic uintmax_t atomic_uintmax_t;
typedef struct { atomic_bool stepring_set; } atomic_flag;
#define ATOMIC_FLAG_INIT { 0 }
#define ATOMIC_VAR_INIT(value) (value)
#define ATOMIC_BOOL_LOCK_FREE 2
#define ATOMIC_CHAR_LOCK_FREE 2
#define ATOMIC_SHORT_LOCK_FREE 2
#define ATOMIC_INT_LOCK_FREE 2
#define ATOMIC_LONG_LOCK_FREE 2
#define ATOMIC_POINTER_LOCK_FREE 2
#define kill_dependency(value) (value)
#define atomic_init(place, value) __atomic_store_n ((place), (value), 0)
#define atomic_store(place, value) __atomic_store_n ((place), (value), 5)
#define atomic_store_explicit(place, value, order) __atomic_store_n ((place), (value), (order))
#define atomic_load(place) __atomic_load_n ((place), 5)
#define atomic_load_explicit(place, order) __atomic_load_n ((place), (order))
#define atomic_exchange(place, value) __atomic_exchange_n ((place), (value), 5)
#define atomic_exchange_explicit(place, value, order) __atomic_exchange_n ((place), (value), (order))
#define atomic_compare_exchange_strong(place, wanted, value) \
  __atomic_compare_exchange_n ((place), (wanted), (value), 0, 5, 5)
#define atomic_compare_exchange_strong_explicit(place, wanted, value, success, failure) \
  __atomic_compare_exchange_n ((place), (wanted), (value), 0, (success), (failure))
#define atomic_compare_exchange_weak(place, wanted, value) \
  __atomic_compare_exchange_n ((place), (wanted), (value), 1, 5, 5)
#define atomic_compare_exchange_weak_explicit(place, wanted, value, success, failure) \
  __atomic_compare_exchange_n ((place), (wanted), (value), 1, (success), (failure))
#define atomic_fetch_add(place, value) __atomic_fetch_add ((place), (value), 5)
#define atomic_fetch_add_explicit(place, value, order) __atomic_fetch_add ((place), (value), (order))
#define atomic_fetch_sub(place, value) __atomic_fetch_sub ((place), (value), 5)
#define atomic_fetch_sub_explicit(place, value, order) __atomic_fetch_sub ((place), (value), (order))
#define atomic_fetch_or(place, value) __atomic_fetch_or ((place), (value), 5)
#define atomic_fetch_or_explicit(place, value, order) __atomic_fetch_or ((place), (value), (order))
#define atomic_fetch_xor(place, value) __atomic_fetch_xor ((place), (value), 5)
#define atomic_fetch_xor_explicit(place, value, order) __atomic_fetch_xor ((place), (value), (order))
#define atomic_fetch_and(place, value) __atomic_fetch_and ((place), (value), 5)
#define atomic_fetch_and_explicit(place, value, order) __atomic_fetch_and ((place), (value), (order))
#define atomic_flag_test_and_set(flag) __atomic_test_and_set ((flag), 5)
#define atomic_flag_test_and_set_explicit(flag, order) __atomic_test_and_set ((flag), (order))
#define atomic_flag_clear(flag) __atomic_clear ((flag), 5)
#define atomic_flag_clear_explicit(flag, order) __atomic_clear ((flag), (order))
#define atomic_thread_fence(order) __atomic_thread_fence (order)
#define atomic_signal_fence(order) __atomic_signal_fence (order)
#define atomic_is_lock_free(place) 1
#endif
