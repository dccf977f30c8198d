/*
{% for line in header %}
 *{% if line %} {{ line }}{% endif +%}
{% endfor %}
 */
#include "{{ stem }}.h"
{% if shift32 %}

/* Shift to the right of a number that is not negative. */
static int32_t {{ stem }}_down32(int32_t x, uint32_t bits)
{
    const uint32_t shifted = (uint32_t)x >> bits;

    return (int32_t)shifted;
}
{% endif %}
{% if shift64 %}

/* Shift to the right of a number that is not negative. */
static int64_t {{ stem }}_down64(int64_t x, uint32_t bits)
{
    const uint64_t shifted = (uint64_t)x >> bits;

    return (int64_t)shifted;
}
{% endif %}
{% if root %}

/* Square root rounded to nearest, one bit at a time; 0 for a negative number. */
static int64_t {{ stem }}_root(int64_t x)
{
    uint64_t rest = (x < 0) ? 0U : (uint64_t)x;
    uint64_t found = 0U;
    uint64_t bit = (uint64_t)1 << 62;
    int step;

    for (step = 0; step < 32; step++) {
        if (rest >= (found + bit)) {
            rest -= found + bit;
            found = (found >> 1) + bit;
        } else {
            found >>= 1;
        }
        bit >>= 2;
    }
    if (rest > found) {
        found += 1U;
    }
    return (int64_t)found;
}

/* Quotient rounded to nearest, one bit at a time. */
static int64_t {{ stem }}_quotient(uint64_t numerator, uint64_t denominator)
{
    uint64_t rest = 0U;
    uint64_t found = 0U;
    uint64_t bit = (uint64_t)1 << 63;
    int step;

    for (step = 0; step < 64; step++) {
        rest <<= 1;
        if ((numerator & bit) != 0U) {
            rest += 1U;
        }
        if (rest >= denominator) {
            rest -= denominator;
            found |= bit;
        }
        bit >>= 1;
    }
    if (rest >= (denominator - rest)) {
        found += 1U;
    }
    return (int64_t)found;
}
{% endif %}
{% for f in formulas %}

static {{ f.x }} {{ f.stem }}_held({{ f.x }} {{ argument }})
{
    {{ f.x }} inside = {{ argument }};

    if (inside < {{ f.upper }}_FROM) {
        inside = {{ f.upper }}_FROM;
    } else if (inside > {{ f.upper }}_TO) {
        inside = {{ f.upper }}_TO;
    } else {
        /* Inside already. */
    }
    return inside;
}

{{ f.y }} {{ f.stem }}({{ f.x }} {{ argument }})
{
{% for line in f.value %}
{% if line %}
    {{ line }}
{% else %}

{% endif %}
{% endfor %}
}

int64_t {{ f.stem }}_slope({{ f.x }} {{ argument }})
{
{% for line in f.slope %}
{% if line %}
    {{ line }}
{% else %}

{% endif %}
{% endfor %}
}

{{ stem }}_status {{ f.stem }}_checked({{ f.x }} {{ argument }}, {{ f.y }} *value)
{
    {{ stem }}_status status = {{ upper }}_OK;

    if ({{ argument }} < {{ f.upper }}_FROM) {
        status = {{ upper }}_BELOW;
    } else if ({{ argument }} > {{ f.upper }}_TO) {
        status = {{ upper }}_ABOVE;
    } else {
        *value = {{ f.stem }}({{ argument }});
    }
    return status;
}

void {{ f.stem }}_many(const {{ f.x }} *{{ argument }}, {{ f.y }} *value, size_t count)
{
    size_t i;

    for (i = 0; i < count; i++) {
        value[i] = {{ f.stem }}({{ argument }}[i]);
    }
}

/* Distance of the value at a count from the wanted one. */
static int64_t {{ f.stem }}_miss({{ f.x }} {{ argument }}, int64_t wanted)
{
    const int64_t miss = (int64_t){{ f.stem }}({{ argument }}) - wanted;

    return (miss < 0) ? -miss : miss;
}

/* Finds the last count that is still under the value, bit by bit from the top,
   and takes the nearer of it and the next. */
static {{ stem }}_status {{ f.stem }}_search({{ f.y }} value, {{ f.x }} from, {{ f.x }} to, int rising, {{ f.x }} *found)
{
    const int64_t wanted = (int64_t)value;
    const {{ f.x }} first = (rising != 0) ? from : to;
    const {{ f.x }} last = (rising != 0) ? to : from;
    const int64_t least = (int64_t){{ f.stem }}(first);
    const int64_t most = (int64_t){{ f.stem }}(last);
    {{ stem }}_status status = {{ upper }}_OK;

    if ((wanted < (least - {{ f.upper }}_ROUNDING)) || (wanted > (most + {{ f.upper }}_ROUNDING))) {
        status = {{ upper }}_NO_SOLUTION;
    } else if (wanted <= least) {
        *found = first;
    } else if (wanted >= most) {
        *found = last;
    } else {
        const {{ f.work }} end = ({{ f.work }})to;
        {{ f.work }} low = ({{ f.work }})from;
        {{ f.work }} high;
        {{ f.work }} bit = {{ f.top }};

        while (bit > 0) {
            const {{ f.work }} next = low + bit;

            if (next < end) {
                const {{ f.y }} there = {{ f.stem }}(({{ f.x }})next);

                if ((rising != 0) ? (there < value) : (there >= value)) {
                    low = next;
                }
            }
            bit /= 2;
        }
        if (low < end) {
            high = low + 1;
        } else {
            high = low;
        }
        if ({{ f.stem }}_miss(({{ f.x }})low, wanted) <= {{ f.stem }}_miss(({{ f.x }})high, wanted)) {
            *found = ({{ f.x }})low;
        } else {
            *found = ({{ f.x }})high;
        }
    }
    return status;
}
{% for i in f.inverses %}

{{ stem }}_status {{ f.stem }}_{{ i.name }}({{ f.y }} value, {{ f.x }} *{{ argument }})
{
{% if i.same %}
    return {{ f.stem }}_inverse(value, {{ argument }});
{% else %}
    /* The formula {{ i.way }} there. */
    return {{ f.stem }}_search(value, {{ i.low }}, {{ i.high }}, {{ i.rising }}, {{ argument }});
{% endif %}
}
{% endfor %}
{% endfor %}
