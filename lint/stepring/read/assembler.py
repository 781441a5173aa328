"""Assembler text in C sources, lifted out before anything else looks at the text.

Compilers take assembler in many shapes: lines between ``#asm`` and ``#endasm``, words between ``_asm`` and
``_endasm``, blocks ``__asm { ... }``, whole functions ``__asm void f(void) { ... }``, single lines. Each becomes an
empty ``__asm__("");`` statement. GNU C's own form, with its operands, stays for ``read.gnu``.
"""

import re

_ASM_LINES = re.compile(r"\n[ \t]*#[ \t]*asm\b(?!\s*\()[^\n]*\n(?s:.*?)\n[ \t]*#[ \t]*endasm\b[^\n]*")
_ASM_CALL = re.compile(r'\n([ \t]*)#[ \t]*asm[ \t]*\([ \t]*("(?:[^"\\\n]|\\.)*")[ \t]*\)')
_ASM_WORDS = re.compile(r"__?asm\b(?![ \t]*[({])((?:(?!_endasm\b)[\s\S])*?)_?_endasm\b")
_INNER = r"\{((?:[^{}]|\{[^{}]*\})*)\}"
_PLAIN_ASM = r"(?:volatile|__volatile__|__volatile|goto|inline|__inline__|__inline)\b"
_ASM_BARE = re.compile(
    r"asm(?:__)?(?:\s+(?:volatile|__volatile__|__volatile))?\s*\{|asm[ \t\r\n]+(?!" + _PLAIN_ASM + r")[A-Za-z.]"
)
_ASM_FUNCTION = re.compile(r"\b_{0,2}asm\b((?:\s+[A-Za-z_]\w*[\s*]*)+\([^(){};]*\)\s*)" + _INNER)
_ASM_BLOCK = re.compile(r"\b_{0,2}asm(?:__)?(?:\s+(?:volatile|__volatile__|__volatile))?\s*" + _INNER)
_ASM_LINE = re.compile(r"\b_{0,2}asm[ \t]+(?!" + _PLAIN_ASM + r")(?=[A-Za-z.])[^\n;{}]*;?")


def lift_assembler(text: str) -> str:
    """Replace blocks of assembler text by an empty ``__asm__("");`` statement, line ends kept.

    They must go before carving: quotes, braces and semicolons mean something else in them.
    """
    if "endasm" in text:
        text = _ASM_LINES.sub(lambda m: "\n" + _asm_in_place(m[0][1:]), text)
        text = _ASM_WORDS.sub(lambda m: _asm_in_place(m[0], ""), text)
    if "#asm" in text or "# asm" in text:
        text = _ASM_CALL.sub(r"\n\1__asm__(\2);", text)
    if _ASM_BARE.search(text):
        text = _ASM_FUNCTION.sub(lambda m: m[1] + "{" + _asm_in_place(m[2]) + "}", text)
        text = _ASM_BLOCK.sub(lambda m: _asm_in_place(m[0]), text)
        text = _ASM_LINE.sub(lambda m: _asm_in_place(m[0]), text)
    return text


def _asm_in_place(text: str, end: str = ";") -> str:
    return '__asm__("")' + end + "\n" * text.count("\n")
