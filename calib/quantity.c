#include "calib/quantity.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <udunits2.h>

#include "calib/quoted_text.h"

GQuark rf_quantity_error_quark(void)
{
    return g_quark_from_static_string("rf-quantity-error-quark");
}

/* The unit system reads a few hundred definitions from disk: once per process, never freed, used under the lock alone. */
static GMutex unit_lock;

static ut_system *locked_unit_system(GError **error)
{
    static ut_system *unit_system;
    if (!unit_system) {
        ut_set_error_message_handler(ut_ignore); /* it would write to stderr by itself */
        unit_system = ut_read_xml(NULL);
    }
    if (!unit_system)
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_UNIT,
                    "the table of units can't be read; UDUNITS-2's data files need to be installed");
    return unit_system;
}

/* Two conversions tell scale and offset; a third, that there is nothing else (decibels, dates). */
static bool read_line(const cv_converter *converter, double *scale, double *offset)
{
    double zero = cv_convert_double(converter, 0.0);
    double one = cv_convert_double(converter, 1.0);
    double ten = cv_convert_double(converter, 10.0);
    *offset = zero;
    *scale = zero == 0.0 ? one : (ten - zero) / 10.0;
    double bent = ten - zero - 10.0 * (one - zero);
    return isfinite(zero) && isfinite(one) && isfinite(ten) && *scale > 0.0 &&
           fabs(bent) <= 1e-9 * (fabs(ten) + fabs(zero));
}

static bool convert_units(ut_unit *from, ut_unit *to, double *scale, double *offset)
{
    cv_converter *converter = ut_get_converter(from, to);
    if (!converter) return false;
    bool is_line = read_line(converter, scale, offset);
    cv_free(converter);
    return is_line;
}

/* UDUNITS takes a number in front as part of the unit, so `6 2 mm` would be 12 mm: a unit begins with a letter here. */
static bool begins_like_unit(const char *unit)
{
    return g_ascii_isalpha(*unit) || *unit == '%' || *unit == '\'' || *unit == '"' || (*unit & 0x80) ||
           strcmp(unit, "1") == 0 || g_str_has_prefix(unit, "1/");
}

bool rf_quantity_conversion(const char *unit, const char *si_unit, double *scale, double *offset,
                            GError **error)
{
    g_autofree char *seen = rf_quoted_text(unit);
    if (!begins_like_unit(unit)) {
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_UNIT,
                    "seen `%s` where a unit was needed, such as %s", seen, si_unit);
        return false;
    }
    g_autoptr(GMutexLocker) locker = g_mutex_locker_new(&unit_lock);
    (void)locker;
    ut_system *units = locked_unit_system(error);
    if (!units) return false;
    ut_unit *from = ut_parse(units, unit, g_utf8_validate(unit, -1, NULL) ? UT_UTF8 : UT_LATIN1);
    ut_unit *to = ut_parse(units, si_unit, UT_ASCII);
    bool is_known = from && to, is_alike = is_known && ut_are_convertible(from, to);
    bool is_done = is_alike && convert_units(from, to, scale, offset);
    ut_free(from);
    ut_free(to);
    if (!is_known)
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_UNIT,
                    "seen the unit `%s`, which is unknown; a unit such as %s would do", seen, si_unit);
    else if (!is_alike)
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_DIMENSION,
                    "seen the unit `%s`, which is of another dimension; a unit like %s would do", seen,
                    si_unit);
    else if (!is_done)
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_UNIT,
                    "seen the unit `%s`, which isn't proportional to %s; a plain unit would do", seen,
                    si_unit);
    return is_done;
}

/* The pieces of `-1.60(98)e-19 kg`, as they stand. */
typedef struct {
    char mantissa[64]; /* sign and digits with their point */
    char sigma[64];    /* what the parentheses hold, "" without */
    char exponent[16]; /* "" or e-19 */
    int decimals;
    const char *rest;
} Pieces;

static size_t take_digits(const char **at, char *into, size_t room, int *decimals)
{
    size_t length = strspn(*at, "0123456789."), digits = 0;
    const char *point = memchr(*at, '.', length);
    if (length >= room || (point && memchr(point + 1, '.', length - (size_t)(point - *at) - 1))) return 0;
    for (size_t i = 0; i < length; i++) digits += (*at)[i] != '.';
    memcpy(into, *at, length);
    into[length] = '\0';
    *decimals = point ? (int)(length - 1 - (size_t)(point - *at)) : 0;
    *at += length;
    return digits;
}

static const char *take_sign(const char *at, char *sign)
{
    static const char unicode_minus[] = "\xe2\x88\x92";
    *sign = '+';
    if (g_str_has_prefix(at, unicode_minus)) {
        *sign = '-';
        return at + strlen(unicode_minus);
    }
    if (*at == '-' || *at == '+') *sign = *at++;
    return at;
}

static const char *take_exponent(const char *at, char *into, size_t room)
{
    into[0] = '\0';
    if (*at != 'e' && *at != 'E') return at;
    char sign;
    const char *digits = take_sign(at + 1, &sign);
    size_t length = strspn(digits, "0123456789");
    if (length == 0) return at; /* the unit's own letter, as in `5 eV` written `5eV` */
    if (length + 3 > room) return NULL;
    g_snprintf(into, (gulong)room, "e%c%.*s", sign, (int)length, digits);
    return digits + length;
}

static bool take_pieces(const char *text, Pieces *p)
{
    const char *at = take_sign(text, &p->mantissa[0]);
    p->sigma[0] = '\0';
    if (take_digits(&at, p->mantissa + 1, sizeof p->mantissa - 1, &p->decimals) == 0) return false;
    if (*at == '(') {
        int own_decimals;
        at++;
        if (take_digits(&at, p->sigma, sizeof p->sigma, &own_decimals) == 0 || *at++ != ')') return false;
    }
    p->rest = take_exponent(at, p->exponent, sizeof p->exponent);
    return p->rest != NULL;
}

/* Put together as text and read once, so that 1.602(98)e-19 is the double nearest to what was written. */
static RfValue read_pieces(const Pieces *p)
{
    g_autofree char *value = g_strconcat(p->mantissa, p->exponent, NULL);
    bool has_own_point = strchr(p->sigma, '.') != NULL;
    long exponent = p->exponent[0] ? strtol(p->exponent + 1, NULL, 10) : 0;
    g_autofree char *sigma = g_strdup_printf("%se%ld", p->sigma[0] ? p->sigma : "0",
                                             has_own_point ? exponent : exponent - p->decimals);
    return (RfValue){g_ascii_strtod(value, NULL), g_ascii_strtod(sigma, NULL)};
}

static bool refuse_number(const char *text, const char *rest, GError **error)
{
    g_autofree char *seen = rf_quoted_text(text);
    const char *hint = "a number such as 6.000(10), with its uncertainty in the last digits, would do";
    if (rest && *rest == ',')
        hint = "a decimal point is needed, no comma";
    else if (strstr(text, "\xc2\xb1") || strstr(text, "+-") || strstr(text, "+/-"))
        hint = "6.000(10) is the form for 6.000 +- 0.010";
    else if (g_ascii_strncasecmp(text, "nan", 3) == 0 || strcasestr(text, "inf"))
        hint = "a finite number is needed";
    g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_NUMBER, "seen `%s`; %s", seen, hint);
    return false;
}

static bool parse_pieces(const char *text, RfValue *out, const char **unit, GError **error)
{
    Pieces pieces;
    if (!take_pieces(text, &pieces)) return refuse_number(text, NULL, error);
    const char *rest = pieces.rest;
    if (*rest == ',' || *rest == '(' || *rest == '.' || *rest == '+') return refuse_number(text, rest, error);
    while (g_ascii_isspace(*rest)) rest++;
    if (g_str_has_prefix(rest, "\xc2\xb1") || g_str_has_prefix(rest, "+"))
        return refuse_number(text, NULL, error);
    RfValue value = read_pieces(&pieces);
    if (!isfinite(value.value) || !isfinite(value.sigma)) {
        g_autofree char *seen = rf_quoted_text(text);
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_NUMBER,
                    "seen `%s`, which is too large; a finite number is needed", seen);
        return false;
    }
    *out = value;
    *unit = rest;
    return true;
}

bool rf_quantity_parse(const char *text, const char *si_unit, RfValue *out, GError **error)
{
    g_autofree char *plain = g_strstrip(g_strdup(text)), *seen = rf_quoted_text(plain);
    const char *unit;
    RfValue raw;
    double scale = 1.0, offset = 0.0;
    if (!parse_pieces(plain, &raw, &unit, error)) return false;
    if (*unit == '\0' && strcmp(si_unit, "1") != 0) {
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_UNIT,
                    "seen `%s` without a unit; `%s %s` would do, or any other unit of that dimension", seen,
                    seen, si_unit);
        return false;
    }
    if (*unit != '\0' && !rf_quantity_conversion(unit, si_unit, &scale, &offset, error)) {
        g_prefix_error(error, "`%s`: ", seen);
        return false;
    }
    RfValue converted = {offset + scale * raw.value, scale * raw.sigma};
    if (!isfinite(converted.value) || !isfinite(converted.sigma)) {
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_NUMBER,
                    "seen `%s`, which is too large in %s; a finite number is needed", seen, si_unit);
        return false;
    }
    *out = converted;
    return true;
}

bool rf_quantity_parse_number(const char *text, RfValue *out, GError **error)
{
    g_autofree char *plain = g_strstrip(g_strdup(text));
    const char *unit;
    RfValue value;
    if (!parse_pieces(plain, &value, &unit, error)) return false;
    if (*unit != '\0') {
        g_autofree char *seen = rf_quoted_text(plain), *more = rf_quoted_text(unit);
        g_set_error(error, RF_QUANTITY_ERROR, RF_QUANTITY_ERROR_UNIT,
                    "seen `%s` where a plain number was needed; it goes without `%s`", seen, more);
        return false;
    }
    *out = value;
    return true;
}

/* Power of ten of the first digit of |x| once rounded to `digits` digits. */
static int leading_power(double x, int digits)
{
    char text[40];
    g_snprintf(text, sizeof text, "%.*e", digits - 1, fabs(x));
    const char *exponent = strchr(text, 'e');
    return exponent ? (int)strtol(exponent + 1, NULL, 10) : 0;
}

static char *format_exact(double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    for (int digits = 1; digits <= 17; digits++) {
        char how[8];
        g_snprintf(how, sizeof how, "%%.%dg", digits);
        g_ascii_formatd(text, sizeof text, how, value);
        if (g_ascii_strtod(text, NULL) == value) break; // NOLINT(clang-analyzer-security.FloatLoopCounter)
    }
    return g_strdup(text);
}

static char *format_fixed(double value, double sigma, int power)
{
    double unit = pow(10.0, power);
    int sigma_power = leading_power(sigma, 2) - power;
    int decimals = MAX(0, 1 - sigma_power);
    double step = pow(10.0, sigma_power - 1); /* place of sigma's second digit */
    double shown = decimals > 0 ? value / unit : round(value / unit / step) * step;
    double digits = decimals > 0 ? sigma / unit * pow(10.0, decimals) : round(sigma / unit / step) * step;
    char how[8], text[G_ASCII_DTOSTR_BUF_SIZE + 320], digit_text[G_ASCII_DTOSTR_BUF_SIZE + 320];
    g_snprintf(how, sizeof how, "%%.%df", decimals);
    g_ascii_formatd(text, sizeof text, how, shown);
    g_ascii_formatd(digit_text, sizeof digit_text, "%.0f", digits);
    return power == 0 ? g_strdup_printf("%s(%s)", text, digit_text)
                      : g_strdup_printf("%s(%s)e%d", text, digit_text, power);
}

char *rf_quantity_format(RfValue value, const char *unit)
{
    double size = MAX(fabs(value.value), value.sigma);
    g_autofree char *number = NULL;
    if (!(value.sigma > 0.0)) {
        number = format_exact(value.value);
    } else {
        int power = leading_power(size, 3);
        bool is_plain = power >= -3 && power < 6 && leading_power(value.sigma, 2) >= -12;
        number = format_fixed(value.value, value.sigma, is_plain ? 0 : power);
    }
    return unit && *unit ? g_strdup_printf("%s %s", number, unit) : g_steal_pointer(&number);
}
