"""What functions of the C library do to values: which arguments they write through, and what they can return.

Written from the descriptions in N1570 clause 7. A function that is not listed is unknown code.
"""

from dataclasses import dataclass
from typing import Final


@dataclass(frozen=True, slots=True)
class Contract:
    """``writes``: numbers of the arguments whose targets are written; ``onward``: from that argument on all are.

    ``fills``: the targets are filled with the byte in argument 1. ``low`` and ``high`` bound the result, None where
    its type does. ``returns``: False where the function does not come back.
    """

    writes: tuple[int, ...] = ()
    onward: int | None = None
    fills: bool = False
    low: int | None = None
    high: int | None = None
    returns: bool = True


_PURE: Final = Contract()
_TRUTH: Final = Contract(low=0)
_SIZE: Final = Contract(low=0)
_FIRST: Final = Contract(writes=(0,))
_NEVER: Final = Contract(returns=False)

CONTRACTS: Final[dict[str, Contract]] = {
    **dict.fromkeys(("strlen", "strnlen", "strspn", "strcspn"), _SIZE),
    **dict.fromkeys(
        ("memcmp", "strcmp", "strncmp", "strcasecmp", "strncasecmp", "atoi", "atol", "strcoll", "memchr", "strchr",
         "strrchr", "strstr", "strpbrk", "labs", "abs", "toupper", "tolower", "printf", "puts", "putchar", "fflush",
         "fputs", "fputc", "putc", "fprintf", "time", "clock", "sin", "cos", "tan", "sqrt", "sqrtf", "fabs", "fabsf",
         "floor", "floorf", "ceil", "ceilf", "pow", "powf", "exp", "expf", "log", "logf", "sinf", "cosf", "tanf",
         "atan2", "atan2f", "round", "roundf", "lround", "lroundf", "fmod", "fmodf",
         "vprintf", "isalpha", "isdigit", "isalnum",
         "isspace", "isxdigit", "isupper", "islower", "isprint", "ispunct", "iscntrl", "malloc", "calloc", "free",
         "__builtin_expect", "__builtin_popcount", "__builtin_clz", "__builtin_ctz", "__builtin_bswap16",
         "__builtin_bswap32", "__builtin_constant_p", "htons", "htonl", "ntohs", "ntohl"),
        _PURE,
    ),
    "rand": Contract(low=0),
    **dict.fromkeys(
        ("memcpy", "memmove", "strcpy", "strncpy", "strcat", "strncat", "sprintf", "snprintf", "vsprintf", "vsnprintf",
         "strlcpy", "strlcat", "__builtin_memcpy", "fgets", "fread"),
        _FIRST,
    ),
    "memset": Contract(writes=(0,), fills=True),
    "__builtin_memset": Contract(writes=(0,), fills=True),
    "sscanf": Contract(onward=2),
    "scanf": Contract(onward=1),
    "fscanf": Contract(onward=2),
    "strtol": Contract(writes=(1,)),
    "strtoul": Contract(writes=(1,)),
    "strtod": Contract(writes=(1,)),
    "strtok_r": Contract(writes=(0, 2)),
    **dict.fromkeys(
        ("abort", "exit", "_Exit", "quick_exit", "longjmp", "thrd_exit", "__builtin_unreachable", "__builtin_trap"),
        _NEVER,
    ),
}  # fmt: skip
