/*
{% for line in header %}
 *{% if line %} {{ line }}{% endif +%}
{% endfor %}
 */
#ifndef {{ upper }}_H
#define {{ upper }}_H

#include <stddef.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Why there is no answer. */
typedef enum {
    {{ upper }}_OK = 0,
    {{ upper }}_BELOW = 1,
    {{ upper }}_ABOVE = 2,
    {{ upper }}_NOT_A_NUMBER = 3,
    {{ upper }}_NO_SOLUTION = 4,
    {{ upper }}_OUTSIDE_FAMILY = 5
} {{ stem }}_status;

#define {{ upper }}_SPEC_SHA256 "{{ sha256 }}"
{% for p in family %}

/* The family's box: {{ p.spec }} in {{ p.unit }}. */
#define {{ upper }}_{{ p.upper }}_FROM ({{ p.from }})
#define {{ upper }}_{{ p.upper }}_TO ({{ p.to }})
{% endfor %}
{% for f in formulas %}

/* {{ f.name }} in {{ f.unit }}, its control in {{ f.control_unit }}; the range holds over the whole box. */
#define {{ f.upper }}_FROM ({{ f.from }})
#define {{ f.upper }}_TO ({{ f.to }})
#define {{ f.upper }}_AT ({{ f.at }})
/* Level at the operating point and the centre of the box. */
#define {{ f.upper }}_E0 ({{ f.e0 }})
#define {{ f.upper }}_ROUNDING ({{ f.rounding }})

/* The formula, no check. */
double {{ f.stem }}(double {{ argument }}{% for p in family %}, double {{ p.name }}{% endfor %});
/* Its derivative with respect to the control, no check. */
double {{ f.stem }}_slope(double {{ argument }}{% for p in family %}, double {{ p.name }}{% endfor %});
{% for p in family %}
/* Its derivative with respect to {{ p.spec }}, no check. */
double {{ f.stem }}_slope_{{ p.spec }}(double {{ argument }}{% for q in family %}, double {{ q.name }}{% endfor %});
{% endfor %}
/* The formula inside its range and box, whose ends belong to them; writes only when OK. */
{{ stem }}_status {{ f.stem }}_checked(double {{ argument }}{% for p in family %}, double {{ p.name }}{% endfor %}, double *value);
/* The control at which the formula gives the value, on the stretch that holds the
   operating point; writes only when OK. */
{{ stem }}_status {{ f.stem }}_inverse(double value{% for p in family %}, double {{ p.name }}{% endfor %}, double *{{ argument }});
{% if f.both %}
/* The same on the stretches below and above the turning point, which is the operating point. */
{{ stem }}_status {{ f.stem }}_inverse_below(double value{% for p in family %}, double {{ p.name }}{% endfor %}, double *{{ argument }});
{{ stem }}_status {{ f.stem }}_inverse_above(double value{% for p in family %}, double {{ p.name }}{% endfor %}, double *{{ argument }});
{% endif %}
/* The formula for many controls; the arrays may be the same, else disjoint. */
void {{ f.stem }}_many(const double *{{ argument }}{% for p in family %}, double {{ p.name }}{% endfor %}, double *value, size_t count);
{% endfor %}

#ifdef __cplusplus
}
#endif

#endif
