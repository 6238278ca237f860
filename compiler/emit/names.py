"""Names in emitted code: the author's names stay, ours keep out of their way."""

import re

# Macros and types that the headers of a module, or a compiler in its default mode, define: a local of that name would not compile.
_C_MACRO = re.compile(
    r"(DBL|FLT|LDBL|DEC|DECIMAL|FP|M|MATH|INT\d*|UINT\d*|INTMAX|UINTMAX|INTPTR|UINTPTR|PTRDIFF|SIZE|SIG_ATOMIC|WCHAR|WINT)_[A-Z0-9_]+[A-Za-z]?"
    r"|NAN|INFINITY|SNAN[FL]?|HUGE|HUGE_VAL[FL]?|HUGE_VAL_F\d+X?|NULL|MAXFLOAT|DOMAIN|SING|OVERFLOW|UNDERFLOW|PLOSS|TLOSS|X_TLOSS|EOF|BUFSIZ"
    r"|math_errhandling|errno|assert|offsetof|linux|unix|i386|is(finite|inf|nan|normal|greater|greaterequal|less|lessequal|lessgreater|unordered)"
    r"|(BIG|LITTLE|PDP)_ENDIAN|BYTE_ORDER|FD_[A-Z]+|NFDBITS|RAND_MAX|MB_CUR_MAX|EXIT_[A-Z]+|W[A-Z]{5,}|alloca|strn?dupa|issubnormal"
    r"|[bl]e(16|32|64)toh|hto[bl]e(16|32|64)"
    r"|fpclassify|signbit|u?int(_fast|_least)?\d+_t|u?int(max|ptr)_t|(size|ptrdiff|wchar|float|double|max_align)_t")


def taken_in_c(name):
    return _C_MACRO.fullmatch(name) is not None


def taken_in_python(name):
    """The modules that emitted kernels use."""
    return name in ("math", "struct")


class Names:
    """The names of one module in one target: `of(name)` for an author's name or one made from it, `ours(name)` for one of ours."""

    def __init__(self, model, is_taken):
        self.is_taken = is_taken
        self.author = {}
        declared = [item.name for group in (model.constants, model.parameters, model.definitions, model.outputs) for item in group]
        declared.append(model.unknown.name)
        for name in declared:
            self.author[name] = _free(name + "_", declared) if is_taken(name) else name
        self.used = frozenset(self.author.values())

    def of(self, name):
        if name in self.author:
            return self.author[name]
        made = re.sub("__+", "_", name)                  # C++ reserves every name with two underscores in a row
        return _free(made + "_" if self.is_taken(made) else made, self.used)

    def ours(self, name):
        """A name for a formal argument of a kernel: as given, or with underscores where the author uses it."""
        return _free(name, self.used)


def _free(name, taken):
    """The name, or a free one made from it."""
    stem = name.rstrip("_")
    return next(free for free in (name, f"{stem}_", *(f"{stem}_{k}" for k in range(2, len(taken) + 4))) if free not in taken)
