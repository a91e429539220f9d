dnl Warnings and the --enable-* switches of configure.
LW_WARNINGS="-Wall -Wextra -Wshadow -Wconversion -Wmissing-prototypes -Wvla -Wformat=2 -Wdouble-promotion"
AC_ARG_ENABLE([werror], [AS_HELP_STRING([--enable-werror], [treat warnings as errors])])
AS_IF([test "x$enable_werror" = xyes], [LW_WARNINGS="$LW_WARNINGS -Werror"])
AC_ARG_ENABLE([sanitizers], [AS_HELP_STRING([--enable-sanitizers], [address and undefined-behaviour sanitizers])])
LW_SANITIZE=
AS_IF([test "x$enable_sanitizers" = xyes],
  [LW_SANITIZE="-fsanitize=address,undefined -fno-sanitize-recover=undefined -fno-omit-frame-pointer"])
AC_ARG_ENABLE([coverage], [AS_HELP_STRING([--enable-coverage], [instrument for make coverage])])
AS_IF([test "x$enable_coverage" = xyes], [LW_SANITIZE="$LW_SANITIZE --coverage"])
dnl Reproducible arithmetic: no contraction of a*b+c that one build makes and another does not.
LW_ARITHMETIC="-ffp-contract=off"
AC_SUBST([LW_WARNINGS])
AC_SUBST([LW_SANITIZE])
AC_SUBST([LW_ARITHMETIC])
AM_CONDITIONAL([COVERAGE], [test "x$enable_coverage" = xyes])
WHOLE_ARCHIVE="-Wl,--whole-archive"
NO_WHOLE_ARCHIVE="-Wl,--no-whole-archive"
AC_SUBST([WHOLE_ARCHIVE])
AC_SUBST([NO_WHOLE_ARCHIVE])
