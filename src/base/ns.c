/*
 * ns.c - nanosecond arithmetic, the calendar, times as people write them. Reads the clock in
 * utc_now_ns() alone; everything else is a pure function.
 */
#include "base/ns.h"

#include <ctype.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "base/str.h"

double s_from_ns(int64_t ns)
{
    return (double)(ns / NS_PER_S) + (double)(ns % NS_PER_S) * 1e-9;
}

int64_t ns_from_s(double s)
{
    if (isnan(s))
        return 0;
    if (s >= 9.2e9)
        return INT64_MAX;
    if (s <= -9.2e9)
        return -INT64_MAX;
    double whole = floor(s);
    return (int64_t)whole * NS_PER_S + (int64_t)llround((s - whole) * 1e9);
}

int64_t mul_div(int64_t a, int64_t b, int64_t c)
{
    __int128 product = (__int128)a * b;
    __int128 quotient = product / c;
    if (product % c < 0)
        quotient--;
    if (quotient > INT64_MAX)
        return INT64_MAX;
    if (quotient < -INT64_MAX)
        return -INT64_MAX;
    return (int64_t)quotient;
}

/* Days since 1970-01-01 and back, by eras of 400 years counted from March (H. Hinnant,
 * "chrono-compatible low-level date algorithms"). */
static int64_t days_from_date(int64_t year, int month, int day)
{
    year -= month <= 2;
    int64_t era = (year >= 0 ? year : year - 399) / 400;
    int64_t year_of_era = year - era * 400;
    int64_t day_of_year = (153 * (month + (month > 2 ? -3 : 9)) + 2) / 5 + day - 1;
    int64_t day_of_era = year_of_era * 365 + year_of_era / 4 - year_of_era / 100 + day_of_year;
    return era * 146097 + day_of_era - 719468;
}

static void date_from_days(int64_t days, struct civil *out)
{
    days += 719468;
    int64_t era = (days >= 0 ? days : days - 146096) / 146097;
    int64_t day_of_era = days - era * 146097;
    int64_t year_of_era =
        (day_of_era - day_of_era / 1460 + day_of_era / 36524 - day_of_era / 146096) / 365;
    int64_t day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    int64_t month = (5 * day_of_year + 2) / 153;
    out->day = (int)(day_of_year - (153 * month + 2) / 5 + 1);
    out->month = (int)(month < 10 ? month + 3 : month - 9);
    out->year = (int)(year_of_era + era * 400 + (out->month <= 2));
}

int64_t civil_to_ns(const struct civil *civil)
{
    int64_t seconds = days_from_date(civil->year, civil->month, civil->day) * 86400 +
                      civil->hour * 3600 + civil->minute * 60 + civil->second;
    return seconds * NS_PER_S + civil->ns;
}

struct civil civil_from_ns(int64_t ns)
{
    struct civil out = {0};
    int64_t days = mul_div(ns, 1, NS_PER_DAY);
    int64_t rest = ns - days * NS_PER_DAY;
    date_from_days(days, &out);
    out.hour = (int)(rest / NS_PER_HOUR);
    out.minute = (int)(rest / NS_PER_MIN % 60);
    out.second = (int)(rest / NS_PER_S % 60);
    out.ns = rest % NS_PER_S;
    return out;
}

bool civil_valid(const struct civil *civil)
{
    if (civil->year < 1700 || civil->year > 2250 || civil->month < 1 || civil->month > 12 ||
        civil->day < 1 || civil->day > 31)
        return false;
    if (civil->hour < 0 || civil->hour > 23 || civil->minute < 0 || civil->minute > 59 ||
        civil->second < 0 || civil->second > 60 || civil->ns < 0 || civil->ns >= NS_PER_S)
        return false;
    struct civil noon = *civil, back;
    noon.hour = 12;
    noon.minute = noon.second = 0;
    noon.ns = 0;
    back = civil_from_ns(civil_to_ns(&noon));
    return back.month == civil->month && back.day == civil->day;
}

/* ".250": `decimals` digits of a fraction of a second, cut; nothing for 0 digits. */
static void format_fraction(int64_t ns, int decimals, char out[16])
{
    char digits[16];
    (void)snprintf(digits, sizeof digits, "%09lld", (long long)ns);
    if (decimals <= 0)
        out[0] = '\0';
    else
        (void)snprintf(out, 16, ".%.*s", decimals > 9 ? 9 : decimals, digits);
}

void ns_format_civil(int64_t civil_ns, char out[TIME_TEXT_SIZE])
{
    struct civil c = civil_from_ns(civil_ns);
    int decimals = c.ns == 0 ? 0 : c.ns % NS_PER_MS == 0 ? 3 : c.ns % NS_PER_US == 0 ? 6 : 9;
    char fraction[16];
    format_fraction(c.ns, decimals, fraction);
    (void)snprintf(out, TIME_TEXT_SIZE, "%04d-%02d-%02dT%02d:%02d:%02d%s", c.year, c.month, c.day,
                   c.hour, c.minute, c.second, fraction);
}

void ns_format_day(int64_t civil_ns, int decimals, char out[TIME_TEXT_SIZE])
{
    struct civil c = civil_from_ns(civil_ns);
    char fraction[16];
    format_fraction(c.ns, decimals, fraction);
    (void)snprintf(out, TIME_TEXT_SIZE, "%02d:%02d:%02d%s", c.hour, c.minute, c.second, fraction);
}

void ns_format_elapsed(int64_t case_ns, int decimals, char out[TIME_TEXT_SIZE])
{
    char sign = case_ns < 0 ? '-' : '+';
    uint64_t ns = case_ns < 0 ? -(uint64_t)case_ns : (uint64_t)case_ns;
    uint64_t second = ns / (uint64_t)NS_PER_S;
    char fraction[16];
    format_fraction((int64_t)(ns % (uint64_t)NS_PER_S), decimals, fraction);
    (void)snprintf(out, TIME_TEXT_SIZE, "%c%02llu:%02llu:%02llu%s", sign,
                   (unsigned long long)(second / 3600), (unsigned long long)(second / 60 % 60),
                   (unsigned long long)(second % 60), fraction);
}

/* Reads 1..max digits at *text and moves past them. */
static bool digits(const char **text, int max, int *out)
{
    int value = 0, count = 0;
    while (count < max && isdigit((unsigned char)**text)) {
        value = value * 10 + (**text - '0');
        (*text)++;
        count++;
    }
    *out = value;
    return count > 0;
}

/* ".25" or ",25" as ns; digits beyond the ninth are cut. No fraction is 0. */
static bool fraction(const char **text, int64_t *out)
{
    *out = 0;
    if (**text != '.' && **text != ',')
        return true;
    (*text)++;
    int64_t unit = NS_PER_S / 10;
    bool any = false;
    for (; isdigit((unsigned char)**text); (*text)++, unit /= 10, any = true)
        *out += unit * (**text - '0');
    return any;
}

/* h:mm[:ss[.f]] at *text. */
static bool clock_digits(const char **text, int hour_digits, struct civil *out)
{
    if (!digits(text, hour_digits, &out->hour) || **text != ':')
        return false;
    (*text)++;
    if (!digits(text, 2, &out->minute) || out->minute > 59)
        return false;
    out->second = 0;
    out->ns = 0;
    if (**text != ':')
        return true;
    (*text)++;
    return digits(text, 2, &out->second) && out->second < 60 && fraction(text, &out->ns);
}

static int64_t clock_ns(const struct civil *civil)
{
    return civil->hour * NS_PER_HOUR + civil->minute * NS_PER_MIN + civil->second * NS_PER_S +
           civil->ns;
}

bool day_time_parse(const char *text, int64_t *out_ns)
{
    struct civil civil = {0};
    if (!clock_digits(&text, 2, &civil) || *text || civil.hour > 23)
        return false;
    *out_ns = clock_ns(&civil);
    return true;
}

/* "Z", "+02:00", "-0530" or nothing. */
static bool zone(const char *text, bool *has, int64_t *offset_ns)
{
    *has = *text != '\0';
    *offset_ns = 0;
    if (!*has || strcmp(text, "Z") == 0 || strcmp(text, "z") == 0)
        return true;
    int sign = *text == '-' ? -1 : *text == '+' ? 1 : 0;
    int hour, minute = 0;
    text++;
    if (sign == 0 || !digits(&text, 2, &hour))
        return false;
    if (*text == ':')
        text++;
    if (*text && !digits(&text, 2, &minute))
        return false;
    *offset_ns = sign * (hour * NS_PER_HOUR + minute * NS_PER_MIN);
    return *text == '\0' && hour <= 14 && minute <= 59;
}

bool iso_parse(const char *text, struct time_arg *out)
{
    struct civil civil = {0};
    if (!digits(&text, 4, &civil.year) || *text++ != '-' || !digits(&text, 2, &civil.month) ||
        *text++ != '-' || !digits(&text, 2, &civil.day))
        return false;
    if (*text != 'T' && *text != 't' && *text != ' ')
        return false;
    text++;
    bool has_zone;
    int64_t offset_ns;
    if (!clock_digits(&text, 2, &civil) || !zone(text, &has_zone, &offset_ns) ||
        !civil_valid(&civil))
        return false;
    out->kind = has_zone ? TIME_ARG_UTC : TIME_ARG_CIVIL;
    out->ns = civil_to_ns(&civil) - offset_ns;
    return true;
}

/* After a sign: hh:mm:ss[.f], or plain seconds. */
static bool from_start(const char *text, int64_t *out)
{
    struct civil civil = {0};
    const char *at = text;
    if (clock_digits(&at, 4, &civil) && !*at) {
        *out = clock_ns(&civil);
        return true;
    }
    double seconds;
    if (!isdigit((unsigned char)*text) || !number_parse_comma(text, &seconds) || seconds > 1e7)
        return false;
    *out = ns_from_s(seconds);
    return true;
}

int time_arg_parse(const char *text, struct time_arg *out, struct err *err)
{
    struct time_arg made = {0};
    bool good = false;
    if (*text == '+' || *text == '-') {
        made.kind = TIME_ARG_FROM_START;
        good = from_start(text + 1, &made.ns);
        if (*text == '-')
            made.ns = -made.ns;
    } else if (iso_parse(text, &made)) {
        good = true;
    } else {
        made.kind = TIME_ARG_OF_DAY;
        good = day_time_parse(text, &made.ns);
    }
    if (!good)
        return err_set(err, ERR_USAGE,
                       "time '%s' is not understood; write 09:41:12.250 (time of day), "
                       "+00:34:07.5 (from the case's start) or 2031-05-20T09:41:12",
                       text);
    *out = made;
    return ERR_OK;
}

int64_t time_arg_resolve(const struct time_arg *arg, int64_t epoch_civil_ns, int utc_offset_s)
{
    switch (arg->kind) {
    case TIME_ARG_FROM_START:
        return arg->ns;
    case TIME_ARG_CIVIL:
        return arg->ns - epoch_civil_ns;
    case TIME_ARG_UTC:
        return arg->ns + utc_offset_s * NS_PER_S - epoch_civil_ns;
    case TIME_ARG_OF_DAY:
        break;
    }
    int64_t earliest = epoch_civil_ns - 6 * NS_PER_HOUR;
    int64_t midnight = mul_div(earliest, 1, NS_PER_DAY) * NS_PER_DAY;
    int64_t at = midnight + arg->ns;
    if (at < earliest)
        at += NS_PER_DAY;
    return at - epoch_civil_ns;
}

int duration_parse(const char *text, int64_t *out_ns, struct err *err)
{
    static const struct {
        const char *suffix;
        double s;
    } units[] = {{"ms", 1e-3}, {"min", 60}, {"s", 1}, {"h", 3600}, {"m", 60}, {"", 1}};
    size_t length = strlen(text);
    for (size_t i = 0; i < sizeof units / sizeof *units; i++) {
        size_t suffix = strlen(units[i].suffix);
        if (length < suffix || strcmp(text + length - suffix, units[i].suffix) != 0)
            continue;
        char number[32];
        double value;
        if (length - suffix >= sizeof number)
            break;
        memcpy(number, text, length - suffix);
        number[length - suffix] = '\0';
        if (!number_parse_comma(number, &value) || fabs(value * units[i].s) > 1e8)
            break;
        *out_ns = ns_from_s(value * units[i].s);
        return ERR_OK;
    }
    return err_set(err, ERR_USAGE, "span '%s' is not understood; write 10s, 250ms, 2min or 1h",
                   text);
}

int64_t utc_now_ns(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_REALTIME, &now);
    return (int64_t)now.tv_sec * NS_PER_S + now.tv_nsec;
}

int utc_offset_now_s(void)
{
    time_t now = time(NULL);
    struct tm local;
    return localtime_r(&now, &local) ? (int)local.tm_gmtoff : 0;
}
