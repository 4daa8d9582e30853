#include "client/svg.h"

#include <math.h>

double svg_at(const struct svg_scale *scale, double value)
{
    double from = scale->from;
    double to = scale->to;
    double at = value;
    if (scale->logarithmic) {
        from = log10(from);
        to = log10(to);
        at = value > 0 ? log10(value) : from;
    }
    double part = to != from ? (at - from) / (to - from) : 0;
    part = fmin(fmax(part, 0), 1);
    return scale->start + part * (scale->end - scale->start);
}

double svg_step(double most, unsigned parts)
{
    static const double STEPS[] = {1, 2, 5};
    if (!(most > 0) || !isfinite(most) || parts == 0) {
        return 1;
    }
    double power = pow(10, floor(log10(most / parts)));
    for (;;) {
        for (size_t i = 0; i < sizeof STEPS / sizeof STEPS[0]; i++) {
            double step = STEPS[i] * power;
            if (step * parts >= most * (1 - 1e-9)) {
                return step;
            }
        }
        power *= 10;
    }
}

void svg_begin(struct html *html, const char *class_name, double width, double height,
               const char *title)
{
    html_put(html, "<svg class=\"%s\" viewBox=\"0 0 %g %g\" role=\"img\" aria-label=\"", class_name,
             width, height);
    html_text(html, title);
    html_put(html, "\">\n");
}

void svg_end(struct html *html)
{
    html_put(html, "</svg>\n");
}

void svg_line(struct html *html, const char *class_name, double x1, double y1, double x2, double y2)
{
    html_put(html, "<line class=\"%s\" x1=\"%.1f\" y1=\"%.1f\" x2=\"%.1f\" y2=\"%.1f\"/>\n",
             class_name, x1, y1, x2, y2);
}

void svg_rect(struct html *html, const char *class_name, double x, double y, double width,
              double height)
{
    html_put(html, "<rect class=\"%s\" x=\"%.1f\" y=\"%.1f\" width=\"%.1f\" height=\"%.1f\"/>\n",
             class_name, x, y, width, height);
}

void svg_label(struct html *html, const char *class_name, double x, double y, const char *anchor,
               const char *text)
{
    html_put(html, "<text class=\"%s\" x=\"%.1f\" y=\"%.1f\" text-anchor=\"%s\">", class_name, x, y,
             anchor);
    html_text(html, text);
    html_put(html, "</text>\n");
}

void svg_path(struct html *html, const char *class_name, const double *x, const double *y,
              size_t count)
{
    bool drawing = false;
    html_put(html, "<path class=\"%s\" d=\"", class_name);
    for (size_t i = 0; i < count; i++) {
        bool known = isfinite(x[i]) && isfinite(y[i]);
        if (known) {
            html_put(html, "%c%.1f %.1f", drawing ? 'L' : 'M', x[i], y[i]);
        }
        drawing = known;
    }
    html_put(html, "\"/>\n");
}
