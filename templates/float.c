/*
{% for line in header %}
 *{% if line %} {{ line }}{% endif +%}
{% endfor %}
 */
#include "{{ stem }}.h"
{% if root %}

#include <stdint.h>
{% endif %}

/* Products and sums must round one by one, as the stated rounding assumes.
   With gcc give -std=c99 or -ffp-contract=off. */
#if defined(__clang__)
#pragma STDC FP_CONTRACT OFF
#endif

static {{ type }} {{ stem }}_held({{ type }} x, {{ type }} low, {{ type }} high)
{
    return (x < low) ? low : ((x > high) ? high : x);
}
{% if root %}

/* A number and its bits. */
typedef union {
    {{ type }} number;
    {{ bits }} bits;
} {{ stem }}_word;

/* Correctly rounded square root, one bit at a time; 0 for anything that is not
   above 0. */
static {{ type }} {{ stem }}_root({{ type }} x)
{
    const {{ bits }} top = ({{ bits }})1 << {{ fraction }};
    {{ stem }}_word word;

    word.number = x;
    if (!(x > {{ zero }})) {
        word.number = {{ zero }};
    } else if (word.bits < ({{ bits }}){{ infinite }}) {
        {{ bits }} rest = word.bits & (top - 1U);
        {{ bits }} found = 0;
        {{ bits }} twice = 0;
        {{ bits }} bit = top << 1;
        int32_t exponent = (int32_t)(word.bits >> {{ fraction }});

        if (exponent == 0) {
            exponent = 1;
            while (rest < top) {
                rest <<= 1;
                exponent -= 1;
            }
        } else {
            rest |= top;
        }
        /* The exponent of the root is half that of x: keep the bias even. */
        exponent += {{ bias }};
        if ((exponent % 2) != 0) {
            rest <<= 1;
        }
        rest <<= 1;
        while (bit != 0U) {
            const {{ bits }} trial = twice + bit;
            if (trial <= rest) {
                twice = trial + bit;
                rest -= trial;
                found += bit;
            }
            rest <<= 1;
            bit >>= 1;
        }
        found += found & 1U;
        exponent = (exponent / 2) - 1;
        word.bits = (found >> 1) + (({{ bits }})exponent * top);
    } else {
        /* Infinity is its own root. */
    }
    return word.number;
}
{% endif %}
{% for f in formulas %}

{{ type }} {{ f.stem }}({{ type }} {{ argument }})
{
{% for line in f.value %}
{% if line %}
    {{ line }}
{% else %}

{% endif %}
{% endfor %}
}

{{ type }} {{ f.stem }}_slope({{ type }} {{ argument }})
{
{% for line in f.slope %}
{% if line %}
    {{ line }}
{% else %}

{% endif %}
{% endfor %}
}

{{ stem }}_status {{ f.stem }}_checked({{ type }} {{ argument }}, {{ type }} *value)
{
    {{ stem }}_status status = {{ upper }}_OK;

    if ({{ argument }} >= {{ f.upper }}_FROM) {
        if ({{ argument }} <= {{ f.upper }}_TO) {
            *value = {{ f.stem }}({{ argument }});
        } else {
            status = {{ upper }}_ABOVE;
        }
    } else if ({{ argument }} < {{ f.upper }}_FROM) {
        status = {{ upper }}_BELOW;
    } else {
        status = {{ upper }}_NOT_A_NUMBER;
    }
    return status;
}

void {{ f.stem }}_many(const {{ type }} *{{ argument }}, {{ type }} *value, size_t count)
{
    size_t i;

    for (i = 0; i < count; i++) {
        value[i] = {{ f.stem }}({{ argument }}[i]);
    }
}
{% if f.searches %}

/* Halves the bracket a fixed number of times, then takes a few of Newton's
   steps inside it. */
static {{ type }} {{ f.stem }}_search({{ type }} value, {{ type }} from, {{ type }} to, int rising)
{
    {{ type }} low = from;
    {{ type }} high = to;
    {{ type }} x;
    int step;

    for (step = 0; step < {{ halvings }}; step++) {
        const {{ type }} middle = {{ half }} * (low + high);
        const {{ type }} there = {{ f.stem }}(middle);

        if ((rising != 0) ? (there < value) : (there >= value)) {
            low = middle;
        } else {
            high = middle;
        }
    }
    x = {{ half }} * (low + high);
    for (step = 0; step < {{ newton }}; step++) {
        const {{ type }} slope = {{ f.stem }}_slope(x);
        if ((slope > {{ zero }}) || (slope < {{ zero }})) {
            x = {{ stem }}_held(x + ((value - {{ f.stem }}(x)) / slope), low, high);
        }
    }
    return x;
}
{% endif %}

/* Control at which the formula gives the value, on the stretch between from
   and to, on which it rises or falls; writes only when OK. */
static {{ stem }}_status {{ f.stem }}_on({{ type }} value, {{ type }} from, {{ type }} to, int rising, {{ type }} *found)
{
    const {{ type }} first = (rising != 0) ? from : to;
    const {{ type }} last = (rising != 0) ? to : from;
    const {{ type }} bottom = {{ f.stem }}(first);
    const {{ type }} top = {{ f.stem }}(last);
    {{ stem }}_status status = {{ upper }}_OK;

    if (value >= top) {
        if (value <= (top + {{ f.upper }}_ROUNDING)) {
            *found = last;
        } else {
            status = {{ upper }}_NO_SOLUTION;
        }
    } else if (value > bottom) {
{% for line in f.solve %}
        {{ line }}
{% endfor %}
    } else if (value >= (bottom - {{ f.upper }}_ROUNDING)) {
        *found = first;
    } else if (value < bottom) {
        status = {{ upper }}_NO_SOLUTION;
    } else {
        status = {{ upper }}_NOT_A_NUMBER;
    }
    return status;
}
{% for i in f.inverses %}

{{ stem }}_status {{ f.stem }}_{{ i.name }}({{ type }} value, {{ type }} *{{ argument }})
{
{% if i.same %}
    return {{ f.stem }}_inverse(value, {{ argument }});
{% else %}
    /* The formula {{ i.way }} there. */
    return {{ f.stem }}_on(value, {{ i.low }}, {{ i.high }}, {{ i.rising }}, {{ argument }});
{% endif %}
}
{% endfor %}
{% endfor %}
