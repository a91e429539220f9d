/** The number that the user wrote, held as an unevaluated sum high + low of two doubles (about 32 digits),
 * and the arithmetic on such sums.
 *
 *  Sources: Dekker, Numerische Mathematik 18:224-242, 1971; Knuth, The Art of Computer Programming 2, 4.2.2
 * (two-sum); Joldes, Muller & Popescu, ACM TOMS 44(2):15res, 2017 (error bounds: add 3u^2, product 5u^2,
 * quotient 9.8u^2). */
#ifndef LW_CORE_DECIMAL_H
#define LW_CORE_DECIMAL_H

#include <math.h>
#include <stdbool.h>
#include <stddef.h>

/** The doubles that are no number and infinite: NAN and INFINITY of math.h are floats, which
 * -Wdouble-promotion tells. */
#define LW_NAN __builtin_nan("")
#define LW_INFINITY __builtin_inf()

/** A number that is not known: an empty field, null. */
#define LW_UNKNOWN LW_NAN

/** high = nearest double to the value, |low| <= half an ulp of high. */
typedef struct lw_decimal {
    double high;
    double low;
} lw_decimal;

static inline lw_decimal lw_decimal_of(double a)
{
    return (lw_decimal){a, 0.0};
}

/** a + b exactly, any magnitudes (Knuth). */
static inline lw_decimal lw_two_sum(double a, double b)
{
    double s = a + b, t = s - a;
    return (lw_decimal){s, (a - (s - t)) + (b - t)};
}

/** a + b exactly when |a| >= |b| or a = 0 (Dekker). */
static inline lw_decimal lw_quick_two_sum(double a, double b)
{
    double s = a + b;
    return (lw_decimal){s, b - (s - a)};
}

/** a * b exactly, by fused multiply-add. */
static inline lw_decimal lw_two_product(double a, double b)
{
    double p = a * b;
    return (lw_decimal){p, fma(a, b, -p)};
}

static inline lw_decimal lw_decimal_add(lw_decimal a, lw_decimal b)
{
    lw_decimal s = lw_two_sum(a.high, b.high), t = lw_two_sum(a.low, b.low);
    s = lw_quick_two_sum(s.high, s.low + t.high);
    return lw_quick_two_sum(s.high, s.low + t.low);
}

static inline lw_decimal lw_decimal_negate(lw_decimal a)
{
    return (lw_decimal){-a.high, -a.low};
}

static inline lw_decimal lw_decimal_subtract(lw_decimal a, lw_decimal b)
{
    return lw_decimal_add(a, lw_decimal_negate(b));
}

static inline lw_decimal lw_decimal_multiply(lw_decimal a, lw_decimal b)
{
    lw_decimal p = lw_two_product(a.high, b.high);
    return lw_quick_two_sum(p.high, p.low + (a.high * b.low + a.low * b.high));
}

static inline lw_decimal lw_decimal_divide(lw_decimal a, lw_decimal b)
{
    double q = a.high / b.high;
    lw_decimal r = lw_decimal_subtract(a, lw_decimal_multiply(b, lw_decimal_of(q)));
    double q2 = r.high / b.high;
    r = lw_decimal_subtract(r, lw_decimal_multiply(b, lw_decimal_of(q2)));
    return lw_decimal_add(lw_quick_two_sum(q, q2), lw_decimal_of(r.high / b.high));
}

/** sqrt of a >= 0 (Karp & Markstein, ACM TOMS 23(4):561-589, 1997). */
static inline lw_decimal lw_decimal_sqrt(lw_decimal a)
{
    if (a.high <= 0.0) return (lw_decimal){0.0, 0.0};
    double x = 1.0 / sqrt(a.high), y = a.high * x;
    lw_decimal r = lw_decimal_subtract(a, lw_two_product(y, y));
    lw_decimal s = lw_quick_two_sum(y, r.high * (x * 0.5));
    r = lw_decimal_subtract(a, lw_decimal_multiply(s, s));
    return lw_decimal_add(s, lw_decimal_of(r.high * (x * 0.5)));
}

/** Why a text is no number. */
typedef enum lw_number_fault {
    LW_NUMBER_FINE = 0,
    LW_NUMBER_EMPTY,
    LW_NUMBER_SYNTAX,     /**< not a decimal number: a word, a hexadecimal, junk behind it, a comma */
    LW_NUMBER_NOT_FINITE, /**< nan, inf */
    LW_NUMBER_RANGE       /**< overflows a double */
} lw_number_fault;

/** Reads [+-]digits[.digits][(e|E)[+-]digits] of `length` bytes (blanks around it allowed; the digits on one
 * side of the point may be missing). *out gets high = the correctly rounded double, high + low the value to
 * at least 100 bits (fewer where low is subnormal; 0 where the value underflows). Never reads beyond length,
 * no locale. Ordinary numbers (up to 19 digits, exponents to +-22) take a fast exact path. */
lw_number_fault lw_decimal_parse(const char *text, size_t length, lw_decimal *out);
/** "an empty field", "no number", ... */
const char *lw_number_fault_name(lw_number_fault fault);

/** Longest text of lw_double_write, with the final NUL. */
#define LW_DOUBLE_TEXT 32
/** Shortest decimal text that reads back to the same double ("0.1", "1e-07"); NaN gives "" (an unknown number
 * is an empty field). Returns the length. */
size_t lw_double_write(double value, char text[LW_DOUBLE_TEXT]);

#endif
