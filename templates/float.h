/*
{% for line in header %}
 *{% if line %} {{ line }}{% endif +%}
{% endfor %}
 */
#ifndef {{ upper }}_H
#define {{ upper }}_H

#include <stddef.h>

/* SHA-256 of the spec. */
#define {{ upper }}_SPEC_SHA256 ("{{ sha256 }}")
{% for f in formulas %}

{% for c in f.constants %}
/* {{ c.about }} */
#define {{ f.upper }}_{{ c.name }} ({{ c.value }})
{% endfor %}
{% endfor %}

#ifdef __cplusplus
extern "C" {
#endif

/* Whether there is an answer, and if not, why. */
typedef enum {
    {{ upper }}_OK = 0,
    {{ upper }}_BELOW = 1,
    {{ upper }}_ABOVE = 2,
    {{ upper }}_NOT_A_NUMBER = 3,
    {{ upper }}_NO_SOLUTION = 4,
    {{ upper }}_OUTSIDE_FAMILY = 5
} {{ stem }}_status;
{% for f in formulas %}

/* {{ f.name }}, in {{ f.unit }}: the formula, no check. */
{{ type }} {{ f.stem }}({{ type }} {{ argument }});

/* Its derivative with respect to the control, no check. */
{{ type }} {{ f.stem }}_slope({{ type }} {{ argument }});

/* The formula inside its range, whose ends belong to it; writes only when OK. */
{{ stem }}_status {{ f.stem }}_checked({{ type }} {{ argument }}, {{ type }} *value);
{% for i in f.inverses %}

/* Control at which the formula gives the value, on the stretch of the range
   {{ i.words }}; writes only when OK. */
{{ stem }}_status {{ f.stem }}_{{ i.name }}({{ type }} value, {{ type }} *{{ argument }});
{% endfor %}

/* The formula for many controls, no check; the arrays may be the same, else
   they must not overlap. */
void {{ f.stem }}_many(const {{ type }} *{{ argument }}, {{ type }} *value, size_t count);
{% endfor %}

#ifdef __cplusplus
}
#endif

#endif
