"""The words of C dialects: what each is in ISO C, or what it says about a declaration.

GNU C's alternate keywords are described in the manual of the GNU compiler collection (C extensions); the words of
compilers for small processors are those their dialects share: memory spaces, interrupt functions, placement at an
address, single-bit types. A word that programs also use as a plain identifier stands in ``BY_POSITION`` and counts as
a keyword only where an identifier could not stand.
"""


def word_set(text: str) -> frozenset[str]:
    """The words of a text, as a set."""
    return frozenset(text.split())


RENAMED: dict[str, str] = {
    "__const": "const",
    "__const__": "const",
    "__volatile": "volatile",
    "__volatile__": "volatile",
    "__signed": "signed",
    "__signed__": "signed",
    "__inline": "inline",
    "__inline__": "inline",
    "__forceinline": "inline",
    "__restrict": "restrict",
    "__restrict__": "restrict",
    "__complex__": "_Complex",
    "__complex": "_Complex",
    "__thread": "_Thread_local",
    "__int128_t": "__int128",
    "__uint128_t": "unsigned __int128",
    "_Float16": "float",
    "__fp16": "float",
    "__bf16": "float",
    "_Float32": "float",
    "_Float64": "double",
    "_Float32x": "double",
    "_Float128": "long double",
    "_Float64x": "long double",
    "__float128": "long double",
    "__float80": "long double",
    "_Decimal32": "float",
    "_Decimal64": "double",
    "_Decimal128": "long double",
    "_Fract": "int",
    "_Accum": "int",
    "__int8": "char",
    "__int16": "short",
    "__int32": "int",
    "__int64": "long long",
    "__builtin_offsetof": "offsetof",
    "__builtin_choose_expr": "__stepring_choose",
    "__bool": "_Bool",
    "__bit": "_Bool",
    "__sbit": "_Bool",
    "__sfr": "volatile unsigned char",
    "__sfr16": "volatile unsigned short",
    "__sfr32": "volatile unsigned long",
}
"""Words with an ISO spelling of the same meaning (or the nearest type of ISO C)."""

RENAMED_C23: dict[str, str] = {
    "bool": "_Bool",
    "static_assert": "_Static_assert",
    "alignas": "_Alignas",
    "alignof": "_Alignof",
    "thread_local": "_Thread_local",
    "constexpr": "const",
}
"""Keywords since ISO C23; before, they were macros of headers or plain identifiers."""

DROPPED: dict[str, str] = {
    "__extension__": "",
    "_Sat": "",
    "__real__": "",
    "__imag__": "",
    "__cdecl": "",
    "_cdecl": "",
    "__stdcall": "",
    "__fastcall": "",
    "__thiscall": "",
    "__vectorcall": "",
    "__pascal": "",
    "__ptr32": "",
    "__ptr64": "",
    "__w64": "",
    "__unaligned": "",
    "__weak": "weak",
    "__packed": "packed",
    "__packed__": "packed",
    "__irq": "interrupt",
    "__fiq": "interrupt",
    "__swi": "interrupt",
    "__svc": "svc",
    "__interrupt": "interrupt",
    "__interrupt__": "interrupt",
    "__nested": "nested",
    "__monitor": "monitor",
    "__root": "used",
    "__ramfunc": "section",
    "__no_init": "noinit",
    "__noinit": "noinit",
    "__persistent": "noinit",
    "__regvar": "",
    "__noreturn": "noreturn",
    "__intrinsic": "",
    "__value_in_regs": "",
    "__pure": "pure",
    "__softfp": "",
    "__arm": "",
    "__thumb": "",
    "__task": "task",
    "__big_endian": "big_endian",
    "__little_endian": "",
    "__raw": "",
    "__data16": "",
    "__data20": "",
    "__flash": "flash",
    "__flash1": "flash",
    "__flash2": "flash",
    "__flash3": "flash",
    "__flash4": "flash",
    "__flash5": "flash",
    "__memx": "flash",
    "__farflash": "flash",
    "__hugeflash": "flash",
    "__nearflash": "flash",
    "__eeprom": "eeprom",
    "__far": "",
    "__near": "",
    "__huge": "",
    "__tiny": "",
    "__io": "io",
    "__xdata": "",
    "__idata": "",
    "__pdata": "",
    "__using": "",
    "__reentrant": "",
    "__critical": "critical",
    "__naked": "naked",
    "__banked": "",
    "__nonbanked": "",
    "__trap": "",
    "__shadowregs": "",
    "__wparam": "",
    "__evenaccess": "",
    "__saddr": "",
    "__callt": "",
    "__sfrbit": "",
    "__at": "at",
    "__align": "aligned",
    "__aligned": "aligned",
    "__section": "section",
    "__bank": "",
    "__rom": "flash",
    "__declspec": "",
    "__pragma": "",
    "_far": "",
    "_near": "",
    "_interrupt": "interrupt",
    "__ISR": "interrupt",
}
"""Words that are left out; the value is the attribute word they stand for, if any."""

TAKES_GROUP = word_set(
    "__swi __svc __interrupt __interrupt__ __using __at __align __aligned __section __bank __declspec __ISR __pragma"
    " __persistent __sfr __sbit __sfr16 __sfr32"
)
"""Dropped words whose parenthesised operand (or bare number) goes with them."""

NEEDS_GROUP = word_set("__at __align __aligned __section __bank __declspec __using")
"""Of these, the words that are nothing without an operand."""

BY_POSITION: dict[str, str] = {
    "data": "",
    "idata": "",
    "bdata": "",
    "xdata": "",
    "pdata": "",
    "code": "flash",
    "__data": "",
    "__code": "flash",
    "__ram": "",
    "near": "",
    "far": "",
    "huge": "",
    "rom": "flash",
    "ram": "",
    "flash": "flash",
    "eeprom": "eeprom",
    "persistent": "noinit",
    "bank0": "",
    "bank1": "",
    "bank2": "",
    "bank3": "",
    "cregister": "",
    "ioport": "io",
    "interrupt": "interrupt",
    "low_priority": "",
    "high_priority": "",
    "reentrant": "",
    "small": "",
    "compact": "",
    "large": "",
    "alien": "",
    "using": "",
    "_task_": "task",
    "_priority_": "",
    "tiny": "",
    "bit": "",
    "sbit": "",
    "sfr": "",
    "sfr16": "",
    "sfrb": "",
    "sfrw": "",
}
"""Words that are keywords only where a plain identifier cannot stand; the value is the attribute word."""

TYPED_BY_POSITION: dict[str, str] = {
    "bit": "_Bool",
    "sbit": "volatile _Bool",
    "sfr": "volatile unsigned char",
    "sfrb": "volatile unsigned char",
    "sfr16": "volatile unsigned short",
    "sfrw": "volatile unsigned short",
}
"""Of ``BY_POSITION``: words that are types. What initialises ``sbit`` and ``sfr`` is an address, not a value."""

AFTER_DECLARATOR = word_set(
    "interrupt using reentrant small compact large alien _task_ _priority_ __naked __critical __reentrant"
)
AT_WORDS: dict[str, str] = {
    "interrupt": "interrupt",
    "near": "",
    "far": "",
    "tiny": "",
    "eeprom": "eeprom",
    "io": "io",
    "nosvf": "",
    "svlreg": "",
    "packed": "packed",
    "stack": "",
    "nostack": "",
}
"""Words after ``@`` that qualify; any other ``@`` gives an address or a section."""

ASM = frozenset({"asm", "__asm__", "__asm", "_asm"})
TYPEOF = frozenset({"typeof", "__typeof__", "__typeof", "typeof_unqual", "__typeof_unqual__", "__typeof_unqual"})
ALIGNOF = frozenset({"__alignof__", "__alignof", "_Alignof", "alignof"})
VA_ARG = frozenset({"__builtin_va_arg", "va_arg"})
INTERRUPT_MACROS = frozenset({"ISR", "SIGNAL", "INTERRUPT"})
TAKES_TYPE = (
    TYPEOF
    | ALIGNOF
    | VA_ARG
    | word_set("sizeof offsetof __builtin_offsetof __builtin_types_compatible_p _Generic _Alignas _Atomic")
)
"""Words before a parenthesis in which ISO C itself, or this package, expects a type."""
HANDLED = (
    ASM
    | TYPEOF
    | ALIGNOF
    | VA_ARG
    | INTERRUPT_MACROS
    | word_set("__auto_type __attribute__ __attribute __label__ __builtin_types_compatible_p _at_ _Pragma")
)
SPECIAL = frozenset(RENAMED) | frozenset(RENAMED_C23) | frozenset(DROPPED) | frozenset(BY_POSITION) | HANDLED

TYPE_KEYWORDS = word_set(
    "void char short int long float double signed unsigned _Bool _Complex struct union enum const volatile __int128"
    " static extern register inline typedef restrict _Atomic"
)
STATEMENT_KEYWORDS = word_set("return case goto else do if while for switch break continue default sizeof _Alignof")
