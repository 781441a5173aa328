/* What the driver needs of a ring program: its operations behind one interface, its memory, and what is intended. */
#include <stddef.h>

enum { QUEUE, HISTORY };
struct span { void *at; size_t size; };

/* An operation that a program lacks is null. put, get, peek, at, latest and oldest tell 1 (done), 0 (refused) or 2 (it
 * does not say). Slots count from 0; direction is 1 or -1; spare slots are kept empty. sizes ends with 0. */
struct ring_ops {
    int number, kind, spare, direction, overwrites, whole, at_filled, total_is, long_run;
    long at_max, other_capacity;
    unsigned mask;
    size_t element;
    const long *sizes;
    const struct span *spans;
    int span_count;
    struct span (*storage)(long slots);
    int (*start)(long slots);
    void (*preset)(int which);
    long (*head)(void);
    long (*tail)(void);
    int (*put)(unsigned value);
    int (*get)(unsigned *value);
    int (*peek)(unsigned *value);
    int (*at)(long place, unsigned *value);
    long (*count)(void);
    long (*room)(void);
    long (*empty)(void);
    long (*full)(void);
    void (*flush)(void);
    long (*put_n)(const unsigned *values, long n);
    long (*get_n)(unsigned *values, long n);
    long (*skip)(long n);
    unsigned long (*total)(void);
    int (*latest)(unsigned *value);
    int (*oldest)(unsigned *value);
    void (*side)(unsigned value);
};

extern const struct ring_ops *const all_rings[];
extern unsigned char scratch_[1 << 14], arena_[1 << 16];
