"""The rules that ship with stepring: one module, one function and one page a rule.

Each module offers ``RULE``, which the entry point group ``stepring.rules`` names; a company's private rules register
in the same group.
"""
