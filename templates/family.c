/*
{% for line in header %}
 *{% if line %} {{ line }}{% endif +%}
{% endfor %}
 */
#include "{{ stem }}.h"

/* Products and sums must round one by one, as the stated rounding assumes.
   With gcc give -std=c99 or -ffp-contract=off. */
#if defined(__clang__)
#pragma STDC FP_CONTRACT OFF
#endif

static double {{ stem }}_held(double x, double low, double high)
{
    return (x < low) ? low : ((x > high) ? high : x);
}
{% macro parameters() %}{% for p in family %}, double {{ p.name }}{% endfor %}{% endmacro %}
{% macro passed() %}{% for p in family %}, {{ p.name }}{% endfor %}{% endmacro %}
{% macro normalised() %}
{% for p in family %}
    const double {{ p.t }} = ({{ p.name }} - {{ p.middle }}) / {{ p.half }};
{% endfor %}
{% endmacro %}
{% macro unused() %}
{% for p in family %}
    (void){{ p.t }};
{% endfor %}
{% endmacro %}
{% for f in formulas %}

double {{ f.stem }}(double {{ argument }}{{ parameters() }})
{
{{ normalised() }}    const double d = {{ argument }} - {{ f.upper }}_AT;
{% for c in f.coefficients %}
{% if not c.zero %}
    const double c{{ c.power }} = {{ c.value }};
{% endif %}
{% endfor %}

{{ unused() }}    (void)d;
    return {{ f.value }};
}

double {{ f.stem }}_slope(double {{ argument }}{{ parameters() }})
{
{{ normalised() }}    const double d = {{ argument }} - {{ f.upper }}_AT;
{% for c in f.coefficients %}
{% if c.power > 0 and not c.zero %}
    const double c{{ c.power }} = {{ c.value }};
{% endif %}
{% endfor %}

{{ unused() }}    (void)d;
    return {{ f.slope }};
}
{% for p in family %}

double {{ f.stem }}_slope_{{ p.spec }}(double {{ argument }}{{ parameters() }})
{
{{ normalised() }}    const double d = {{ argument }} - {{ f.upper }}_AT;
{% for c in f.coefficients %}
{% if not c.zero %}
    const double c{{ c.power }} = {{ c.slopes[p.axis] }};
{% endif %}
{% endfor %}

{{ unused() }}    (void)d;
    return ({{ f.value }}) / {{ p.half }};
}
{% endfor %}

{{ stem }}_status {{ f.stem }}_checked(double {{ argument }}{{ parameters() }}, double *value)
{
    {{ stem }}_status status = {{ upper }}_OK;

    if (!(({{ argument }} <= 0.0) || ({{ argument }} > 0.0)){% for p in family %} || !(({{ p.name }} <= 0.0) || ({{ p.name }} > 0.0)){% endfor %}) {
        status = {{ upper }}_NOT_A_NUMBER;
    } else if ({% for p in family %}({{ p.name }} < {{ upper }}_{{ p.upper }}_FROM) || ({{ p.name }} > {{ upper }}_{{ p.upper }}_TO){% if not loop.last %} || {% endif %}{% endfor %}) {
        status = {{ upper }}_OUTSIDE_FAMILY;
    } else if ({{ argument }} < {{ f.upper }}_FROM) {
        status = {{ upper }}_BELOW;
    } else if ({{ argument }} > {{ f.upper }}_TO) {
        status = {{ upper }}_ABOVE;
    } else {
        *value = {{ f.stem }}({{ argument }}{{ passed() }});
    }
    return status;
}

void {{ f.stem }}_many(const double *{{ argument }}{{ parameters() }}, double *value, size_t count)
{
    size_t i;

    for (i = 0; i < count; i++) {
        value[i] = {{ f.stem }}({{ argument }}[i]{{ passed() }});
    }
}

/* The nearest zero of the slope from the operating point towards an end of the
   range, or that end. */
static double {{ f.stem }}_turn(double end{{ parameters() }})
{
    const double step = (end - {{ f.upper }}_AT) / {{ looks }}.0;
    double low = {{ f.upper }}_AT;
    double high = low + (0.001 * step);
    double found = end;
    int rises;
    int k;

    rises = ({{ f.stem }}_slope(high{{ passed() }}) > 0.0) ? 1 : 0;
    for (k = 1; k <= {{ looks }}; k++) {
        low = high;
        high = (k == {{ looks }}) ? end : ({{ f.upper }}_AT + ((double)k * step));
        if ((({{ f.stem }}_slope(high{{ passed() }}) > 0.0) ? 1 : 0) != rises) {
            int halving;

            for (halving = 0; halving < {{ halvings }}; halving++) {
                const double middle = 0.5 * (low + high);
                if ((({{ f.stem }}_slope(middle{{ passed() }}) > 0.0) ? 1 : 0) == rises) {
                    low = middle;
                } else {
                    high = middle;
                }
            }
            found = 0.5 * (low + high);
            break;
        }
    }
    return found;
}

/* The control of a value on a stretch on which the formula rises or falls. */
static {{ stem }}_status {{ f.stem }}_on(double value{{ parameters() }}, double from, double to, double *{{ argument }})
{
    const double first = {{ f.stem }}(from{{ passed() }});
    const double last = {{ f.stem }}(to{{ passed() }});
    const int rising = (last > first) ? 1 : 0;
    const double bottom = (rising != 0) ? first : last;
    const double top = (rising != 0) ? last : first;
    {{ stem }}_status status = {{ upper }}_OK;

    if (value >= top) {
        if (value <= (top + {{ f.upper }}_ROUNDING)) {
            *{{ argument }} = (rising != 0) ? to : from;
        } else {
            status = {{ upper }}_NO_SOLUTION;
        }
    } else if (value > bottom) {
        double low = from;
        double high = to;
        double x;
        int step;

        for (step = 0; step < {{ halvings }}; step++) {
            const double middle = 0.5 * (low + high);
            const double there = {{ f.stem }}(middle{{ passed() }});

            if ((rising != 0) ? (there < value) : (there >= value)) {
                low = middle;
            } else {
                high = middle;
            }
        }
        x = 0.5 * (low + high);
        for (step = 0; step < {{ newton }}; step++) {
            const double slope = {{ f.stem }}_slope(x{{ passed() }});
            if ((slope > 0.0) || (slope < 0.0)) {
                x = {{ stem }}_held(x + ((value - {{ f.stem }}(x{{ passed() }})) / slope), low, high);
            }
        }
        *{{ argument }} = x;
    } else if (value >= (bottom - {{ f.upper }}_ROUNDING)) {
        *{{ argument }} = (rising != 0) ? from : to;
    } else if (value < bottom) {
        status = {{ upper }}_NO_SOLUTION;
    } else {
        status = {{ upper }}_NOT_A_NUMBER;
    }
    return status;
}

/* What an inverse refuses before it looks at the value. */
static {{ stem }}_status {{ f.stem }}_refused(double value{{ parameters() }})
{
    {{ stem }}_status status = {{ upper }}_OK;

    if (!((value <= 0.0) || (value > 0.0)){% for p in family %} || !(({{ p.name }} <= 0.0) || ({{ p.name }} > 0.0)){% endfor %}) {
        status = {{ upper }}_NOT_A_NUMBER;
    } else if ({% for p in family %}({{ p.name }} < {{ upper }}_{{ p.upper }}_FROM) || ({{ p.name }} > {{ upper }}_{{ p.upper }}_TO){% if not loop.last %} || {% endif %}{% endfor %}) {
        status = {{ upper }}_OUTSIDE_FAMILY;
    } else {
        /* Nothing speaks against it. */
    }
    return status;
}

{{ stem }}_status {{ f.stem }}_inverse(double value{{ parameters() }}, double *{{ argument }})
{
    {{ stem }}_status status = {{ f.stem }}_refused(value{{ passed() }});

    if (status == {{ upper }}_OK) {
        const double slope = {{ f.stem }}_slope({{ f.upper }}_AT{{ passed() }});
        /* If the operating point is a turning point itself, the branch above it. */
        const double low = ((slope > 0.0) || (slope < 0.0)) ? {{ f.stem }}_turn({{ f.upper }}_FROM{{ passed() }}) : {{ f.upper }}_AT;

        status = {{ f.stem }}_on(value{{ passed() }}, low, {{ f.stem }}_turn({{ f.upper }}_TO{{ passed() }}), {{ argument }});
    }
    return status;
}
{% if f.both %}

{{ stem }}_status {{ f.stem }}_inverse_below(double value{{ parameters() }}, double *{{ argument }})
{
    {{ stem }}_status status = {{ f.stem }}_refused(value{{ passed() }});

    if (status == {{ upper }}_OK) {
        status = {{ f.stem }}_on(value{{ passed() }}, {{ f.stem }}_turn({{ f.upper }}_FROM{{ passed() }}), {{ f.upper }}_AT, {{ argument }});
    }
    return status;
}

{{ stem }}_status {{ f.stem }}_inverse_above(double value{{ parameters() }}, double *{{ argument }})
{
    {{ stem }}_status status = {{ f.stem }}_refused(value{{ passed() }});

    if (status == {{ upper }}_OK) {
        status = {{ f.stem }}_on(value{{ passed() }}, {{ f.upper }}_AT, {{ f.stem }}_turn({{ f.upper }}_TO{{ passed() }}), {{ argument }});
    }
    return status;
}
{% endif %}
{% endfor %}
