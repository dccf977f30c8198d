/*
{% for line in header %}
 *{% if line %} {{ line }}{% endif +%}
{% endfor %}
 */
#ifndef {{ upper }}_H
#define {{ upper }}_H

#include <stddef.h>
#include <stdint.h>

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

/* {{ f.name }}, a count of {{ f.value_step }} {{ f.unit }}, against a count of
   {{ f.control_step }} {{ f.control_unit }}; counts outside the range are held at its ends. */
{{ f.y }} {{ f.stem }}({{ f.x }} {{ argument }});

/* Its derivative: value steps per control step, times 2^16. */
int64_t {{ f.stem }}_slope({{ f.x }} {{ argument }});

/* The formula inside its range, whose ends belong to it; writes only when OK. */
{{ stem }}_status {{ f.stem }}_checked({{ f.x }} {{ argument }}, {{ f.y }} *value);
{% for i in f.inverses %}

/* Count at which the formula comes nearest to the value, on the stretch of the
   range {{ i.words }}; writes only when OK. */
{{ stem }}_status {{ f.stem }}_{{ i.name }}({{ f.y }} value, {{ f.x }} *{{ argument }});
{% endfor %}

/* The formula for many controls; the arrays may be the same if the types are,
   else they must not overlap. */
void {{ f.stem }}_many(const {{ f.x }} *{{ argument }}, {{ f.y }} *value, size_t count);
{% endfor %}

#ifdef __cplusplus
}
#endif

#endif
