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
    {{ bits }} rest;
    {{ bits }} found = 0;
    {{ bits }} twice = 0;
    {{ bits }} bit = top << 1;
    int32_t exponent;

    if (!(x > {{ zero }})) {
        return {{ zero }};
    }
    word.number = x;
    exponent = (int32_t)(word.bits >> {{ fraction }});
    rest = word.bits & (top - 1U);
    if (exponent > {{ infinite }}) {
        return x; /* infinity */
    }
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
    word.bits = (found >> 1) + (({{ bits }})((exponent / 2) - 1) * top);
    return word.number;
}
{% endif %}
{% for f in formulas %}

{{ type }} {{ f.stem }}({{ type }} {{ argument }})
{
{% for line in f.value %}
    {{ line }}
{% endfor %}
}

{{ type }} {{ f.stem }}_slope({{ type }} {{ argument }})
{
{% for line in f.slope %}
    {{ line }}
{% endfor %}
}

{{ stem }}_status {{ f.stem }}_checked({{ type }} {{ argument }}, {{ type }} *value)
{
    {{ stem }}_status status = {{ upper }}_OK;

    if (({{ argument }} >= {{ f.upper }}_FROM) && ({{ argument }} <= {{ f.upper }}_TO)) {
        *value = {{ f.stem }}({{ argument }});
    } else if ({{ argument }} < {{ f.upper }}_FROM) {
        status = {{ upper }}_BELOW;
    } else if ({{ argument }} > {{ f.upper }}_TO) {
        status = {{ upper }}_ABOVE;
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
        const int under = ({{ f.stem }}(middle) < value) ? 1 : 0;
        if (under == rising) {
            low = middle;
        } else {
            high = middle;
        }
    }
    x = {{ half }} * (low + high);
    for (step = 0; step < {{ newton }}; step++) {
        const {{ type }} slope = {{ f.stem }}_slope(x);
        if ((slope > {{ zero }}) || (slope < {{ zero }})) {
            x = {{ stem }}_held(x + (value - {{ f.stem }}(x)) / slope, low, high);
        }
    }
    return x;
}
{% endif %}
{% for i in f.inverses %}

{{ stem }}_status {{ f.stem }}_{{ i.name }}({{ type }} value, {{ type }} *{{ argument }})
{
{% if i.same %}
    return {{ f.stem }}_inverse(value, {{ argument }});
{% else %}
    const {{ type }} least = {{ f.stem }}({{ i.first }});
    const {{ type }} most = {{ f.stem }}({{ i.last }});
    {{ stem }}_status status = {{ upper }}_OK;

    /* The formula {{ i.way }} from {{ i.low }} to {{ i.high }}. */
    if ((value >= (least - {{ f.upper }}_ROUNDING)) && (value <= (most + {{ f.upper }}_ROUNDING))) {
        if (value <= least) {
            *{{ argument }} = {{ i.first }};
        } else if (value >= most) {
            *{{ argument }} = {{ i.last }};
        } else {
{% for line in i.solve %}
            {{ line }}
{% endfor %}
        }
    } else if ((value < least) || (value > most)) {
        status = {{ upper }}_NO_SOLUTION;
    } else {
        status = {{ upper }}_NOT_A_NUMBER;
    }
    return status;
{% endif %}
}
{% endfor %}
{% endfor %}
