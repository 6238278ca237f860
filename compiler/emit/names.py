"""Names in emitted code: the author's names stay, ours keep out of their way."""

# Macros that the standard headers (or a compiler in its default mode) may define; a local of that name would not compile.
C_MACROS = frozenset("""
    NAN INFINITY HUGE_VAL HUGE_VALF HUGE_VALL NULL FP_INFINITE FP_NAN FP_NORMAL FP_SUBNORMAL FP_ZERO FP_ILOGB0 FP_ILOGBNAN
    MATH_ERRNO MATH_ERREXCEPT math_errhandling EOF BUFSIZ errno assert offsetof linux unix i386 DOMAIN SING OVERFLOW UNDERFLOW PLOSS TLOSS
    M_E M_LOG2E M_LOG10E M_LN2 M_LN10 M_PI M_PI_2 M_PI_4 M_1_PI M_2_PI M_2_SQRTPI M_SQRT2 M_SQRT1_2 MAXFLOAT
    fpclassify isfinite isinf isnan isnormal signbit isgreater isgreaterequal isless islessequal islessgreater isunordered
    INT8_MAX INT16_MAX INT32_MAX INT64_MAX INT8_MIN INT16_MIN INT32_MIN INT64_MIN UINT8_MAX UINT16_MAX UINT32_MAX UINT64_MAX
    INTPTR_MAX INTPTR_MIN UINTPTR_MAX INTMAX_MAX INTMAX_MIN UINTMAX_MAX PTRDIFF_MAX PTRDIFF_MIN SIZE_MAX SIG_ATOMIC_MAX WCHAR_MAX WINT_MAX
    INT8_C INT16_C INT32_C INT64_C UINT8_C UINT16_C UINT32_C UINT64_C INTMAX_C UINTMAX_C
    int8_t int16_t int32_t int64_t uint8_t uint16_t uint32_t uint64_t size_t ptrdiff_t
""".split())

PYTHON_TAKEN = frozenset({"math", "struct"})


class Names:
    """The names of one module in one target: `of(name)` for an author's name, `ours(name)` for one of ours."""

    def __init__(self, model, taken):
        self.author = {}
        declared = [item.name for group in (model.constants, model.parameters, model.definitions, model.outputs) for item in group]
        declared.append(model.unknown.name)
        for name in declared:
            self.author[name] = name if name not in taken else _free(name, {*declared, *taken})
        self.used = frozenset(self.author.values())

    def of(self, name):
        return self.author.get(name, name)

    def ours(self, name):
        """A name for a formal argument of a kernel: as given, or with underscores where the author uses it."""
        return _free(name, self.used) if name in self.used else name


def _free(name, taken):
    while name in taken:
        name += "_"
    return name
