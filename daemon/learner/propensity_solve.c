/*
 * The fit to binned evidence. For each scale τ of the deviation the posterior's maximum is found by
 * Fisher scoring, and its marginal likelihood by Laplace; the fits are averaged with these weights.
 *
 * The unknowns are departures: A and ln(B + 1) from the configured ones, and d at the knots, a
 * random walk over octaves whose first value is LEVEL_STEPS steps wide.
 */
#include "daemon/learner/propensity_private.h"

#include <math.h>
#include <stdbool.h>
#include <string.h>

enum {
    SHAPES = 2, /* A and ln(B + 1) */
    UNKNOWNS = SHAPES + PROPENSITY_KNOTS,
    SCALES = 7,
    SCORING_STEPS = 40,
    HALVINGS = 12,
    ROUNDS = 3
};

/* Wide enough for the published variants: A .5 to .6, ln(B + 1) .34 to 1.28. */
static const double A_SPREAD = 0.05;
static const double B_SPREAD = 0.4;
static const double LEVEL_STEPS = 1.0;
/* Steps τ per octave and their prior weights; on average τ² is .107². */
static const struct {
    double scale;
    double weight;
} GRID[SCALES] = {{0.0, 0.58},  {0.05, 0.2},  {0.1, 0.15}, {0.2, 0.05},
                  {0.4, 0.015}, {0.8, 0.004}, {1.6, 0.001}};

struct problem {
    double a;      /* configured */
    double log_b1; /* ln(B + 1), configured */
    double log_growth;
    const struct propensity_bins *bins;
};

/* A symmetric positive matrix and its factor, lower triangles; `size` rows in use. */
struct matrix {
    size_t size;
    double at[UNKNOWNS][UNKNOWNS];
};

struct mode {
    double at[UNKNOWNS];
    double objective; /* ln likelihood + ln prior's exponent */
    double evidence;  /* ln marginal likelihood, up to what all scales share */
    struct matrix factor;
};

/* --- linear algebra --------------------------------------------------------------------------- */

/* Cholesky in place; the matrix is a sum of squares and a prior, so positive. */
static void factorise(struct matrix *m)
{
    for (size_t row = 0; row < m->size; row++) {
        for (size_t column = 0; column <= row; column++) {
            double sum = m->at[row][column];
            for (size_t k = 0; k < column; k++) {
                sum -= m->at[row][k] * m->at[column][k];
            }
            m->at[row][column] =
                row == column ? sqrt(fmax(sum, 1e-12)) : sum / m->at[column][column];
        }
    }
}

static void solve_lower(const struct matrix *factor, double *x)
{
    for (size_t row = 0; row < factor->size; row++) {
        for (size_t k = 0; k < row; k++) {
            x[row] -= factor->at[row][k] * x[k];
        }
        x[row] /= factor->at[row][row];
    }
}

static void solve_upper(const struct matrix *factor, double *x)
{
    for (size_t row = factor->size; row-- > 0;) {
        for (size_t k = row + 1; k < factor->size; k++) {
            x[row] -= factor->at[k][row] * x[k];
        }
        x[row] /= factor->at[row][row];
    }
}

static double log_determinant(const struct matrix *factor)
{
    double sum = 0.0;
    for (size_t row = 0; row < factor->size; row++) {
        sum += 2.0 * log(factor->at[row][row]);
    }
    return sum;
}

/* --- the curve as a function of the unknowns ---------------------------------------------------
 */

/* Of the few unknowns that move the logit at one count: which, and how much. */
struct slopes {
    double logit;
    size_t unknown[4];
    double slope[4];
    size_t count;
};

static struct slopes slopes_at(const struct problem *problem, const double *at, bool deviates,
                               double tag_count)
{
    double a = problem->a + at[0];
    double log_b1 = problem->log_b1 + at[1];
    double b1 = exp(log_b1);
    /* Only a B below 0 at the count 0 comes near the floor. */
    double base = fmax(tag_count + b1 - 1.0, 0.1 * b1);
    double distance = log(base) - log_b1;
    struct slopes slopes = {
        .logit = a * distance - problem->log_growth,
        .unknown = {0, 1},
        .slope = {distance, a * (b1 / base - 1.0)},
        .count = SHAPES,
    };
    if (deviates) {
        struct propensity_place place = propensity_knots_at(tag_count);
        slopes.unknown[2] = SHAPES + place.below;
        slopes.unknown[3] = SHAPES + place.below + 1;
        slopes.slope[2] = 1.0 - place.share;
        slopes.slope[3] = place.share;
        slopes.count = 4;
        slopes.logit += slopes.slope[2] * at[slopes.unknown[2]];
        slopes.logit += slopes.slope[3] * at[slopes.unknown[3]];
    }
    return slopes;
}

/* --- the posterior for one scale ---------------------------------------------------------------
 */

static void add_walk(struct matrix *precision, size_t row, double step)
{
    double weight = 1.0 / (step * step);
    precision->at[row][row] += weight;
    precision->at[row + 1][row + 1] += weight;
    precision->at[row + 1][row] -= weight;
}

static struct matrix prior_precision(double scale)
{
    struct matrix precision = {.size = scale > 0.0 ? UNKNOWNS : SHAPES};
    precision.at[0][0] = 1.0 / (A_SPREAD * A_SPREAD);
    precision.at[1][1] = 1.0 / (B_SPREAD * B_SPREAD);
    if (scale > 0.0) {
        double level = LEVEL_STEPS * scale;
        precision.at[SHAPES][SHAPES] = 1.0 / (level * level);
        for (size_t row = SHAPES; row + 1 < UNKNOWNS; row++) {
            add_walk(&precision, row, scale);
        }
    }
    return precision;
}

/* Σ over the lower triangle of x' P x; `ret_product` is P x. */
static double quadratic(const struct matrix *p, const double *x, double *ret_product)
{
    memset(ret_product, 0, sizeof(double) * UNKNOWNS);
    for (size_t row = 0; row < p->size; row++) {
        for (size_t column = 0; column <= row; column++) {
            ret_product[row] += p->at[row][column] * x[column];
            if (column < row) {
                ret_product[column] += p->at[row][column] * x[row];
            }
        }
    }
    double sum = 0.0;
    for (size_t row = 0; row < p->size; row++) {
        sum += x[row] * ret_product[row];
    }
    return sum;
}

/* ln(1 + e^x) without overflow. */
static double log1pexp(double x)
{
    return x > 0.0 ? x + log1p(exp(-x)) : log1p(exp(x));
}

static double objective_at(const struct problem *problem, const struct matrix *precision,
                           const double *at)
{
    double product[UNKNOWNS];
    double sum = -0.5 * quadratic(precision, at, product);
    bool deviates = precision->size > SHAPES;
    for (size_t bin = 1; bin < CENSUS_BINS; bin++) {
        double given = problem->bins->given[bin];
        double hidden = problem->bins->hidden[bin];
        if (given + hidden > 0.0) {
            double logit = slopes_at(problem, at, deviates, problem->bins->count[bin]).logit;
            sum -= given * log1pexp(-logit) + hidden * log1pexp(logit);
        }
    }
    return sum;
}

/* The gradient of the objective and its expected negative Hessian. */
static void score(const struct problem *problem, const struct matrix *precision, const double *at,
                  double *ret_gradient, struct matrix *ret_information)
{
    *ret_information = *precision;
    (void)quadratic(precision, at, ret_gradient);
    for (size_t row = 0; row < precision->size; row++) {
        ret_gradient[row] = -ret_gradient[row];
    }
    bool deviates = precision->size > SHAPES;
    for (size_t bin = 1; bin < CENSUS_BINS; bin++) {
        double given = problem->bins->given[bin];
        double trials = given + problem->bins->hidden[bin];
        if (!(trials > 0.0)) {
            continue;
        }
        struct slopes s = slopes_at(problem, at, deviates, problem->bins->count[bin]);
        double p = 1.0 / (1.0 + exp(-s.logit));
        for (size_t i = 0; i < s.count; i++) {
            ret_gradient[s.unknown[i]] += (given - trials * p) * s.slope[i];
            for (size_t j = 0; j <= i; j++) {
                ret_information->at[s.unknown[i]][s.unknown[j]] +=
                    trials * p * (1.0 - p) * s.slope[i] * s.slope[j];
            }
        }
    }
}

/* One step of scoring, halved until it does not lose; false where nothing is gained any more. */
static bool step_up(const struct problem *problem, const struct matrix *precision,
                    struct mode *mode)
{
    double step[UNKNOWNS];
    score(problem, precision, mode->at, step, &mode->factor);
    factorise(&mode->factor);
    solve_lower(&mode->factor, step);
    solve_upper(&mode->factor, step);
    double size = 1.0;
    for (int halving = 0; halving < HALVINGS; halving++) {
        double at[UNKNOWNS] = {0};
        for (size_t row = 0; row < precision->size; row++) {
            at[row] = mode->at[row] + size * step[row];
        }
        double objective = objective_at(problem, precision, at);
        if (objective >= mode->objective) {
            bool gained = objective - mode->objective > 1e-8;
            memcpy(mode->at, at, sizeof at);
            mode->objective = objective;
            return gained;
        }
        size *= 0.5;
    }
    return false;
}

/* `mode->at` is the start. */
static void find_mode(const struct problem *problem, double scale, struct mode *mode)
{
    struct matrix precision = prior_precision(scale);
    mode->factor.size = precision.size;
    mode->objective = objective_at(problem, &precision, mode->at);
    for (int step = 0; step < SCORING_STEPS; step++) {
        if (!step_up(problem, &precision, mode)) {
            break;
        }
    }
    double gradient[UNKNOWNS];
    score(problem, &precision, mode->at, gradient, &mode->factor);
    factorise(&mode->factor);
    factorise(&precision);
    mode->evidence =
        mode->objective + 0.5 * log_determinant(&precision) - 0.5 * log_determinant(&mode->factor);
}

/* --- all scales --------------------------------------------------------------------------------
 */

static double knot_count(size_t knot)
{
    return ldexp(1.0, (int)knot) - 1.0;
}

/* Adds weight·(covariance of the logits at the knots), and of their distance from `mean`. */
static void add_covariance(const struct problem *problem, const struct mode *mode, double weight,
                           const double *distance, double *covariances)
{
    double rows[PROPENSITY_KNOTS][UNKNOWNS] = {{0}};
    for (size_t knot = 0; knot < PROPENSITY_KNOTS; knot++) {
        struct slopes s =
            slopes_at(problem, mode->at, mode->factor.size > SHAPES, knot_count(knot));
        for (size_t i = 0; i < s.count; i++) {
            rows[knot][s.unknown[i]] += s.slope[i];
        }
        solve_lower(&mode->factor, rows[knot]);
    }
    for (size_t row = 0; row < PROPENSITY_KNOTS; row++) {
        for (size_t column = 0; column <= row; column++) {
            double sum = distance[row] * distance[column];
            for (size_t k = 0; k < mode->factor.size; k++) {
                sum += rows[row][k] * rows[column][k];
            }
            covariances[row * (row + 1) / 2 + column] += weight * sum;
        }
    }
}

/* The posterior weights of the scales; returns the heaviest. */
static size_t weigh(const struct mode modes[SCALES], double *ret_weights)
{
    size_t best = 0;
    double sum = 0.0;
    for (size_t i = 0; i < SCALES; i++) {
        ret_weights[i] = log(GRID[i].weight) + modes[i].evidence;
        best = ret_weights[i] > ret_weights[best] ? i : best;
    }
    double most = ret_weights[best];
    for (size_t i = 0; i < SCALES; i++) {
        ret_weights[i] = exp(ret_weights[i] - most);
        sum += ret_weights[i];
    }
    for (size_t i = 0; i < SCALES; i++) {
        ret_weights[i] /= sum;
    }
    return best;
}

static void average(const struct problem *problem, const struct mode modes[SCALES],
                    struct propensity_fit *fit)
{
    double weights[SCALES];
    fit->deviation_scale = GRID[weigh(modes, weights)].scale;
    /* A and B on average; d is what the average of the logits at the knots has beyond them. */
    double shapes[UNKNOWNS] = {0};
    double logits[SCALES][PROPENSITY_KNOTS];
    double mean[PROPENSITY_KNOTS] = {0};
    for (size_t i = 0; i < SCALES; i++) {
        shapes[0] += weights[i] * modes[i].at[0];
        shapes[1] += weights[i] * modes[i].at[1];
        bool deviates = modes[i].factor.size > SHAPES;
        for (size_t knot = 0; knot < PROPENSITY_KNOTS; knot++) {
            logits[i][knot] = slopes_at(problem, modes[i].at, deviates, knot_count(knot)).logit;
            mean[knot] += weights[i] * logits[i][knot];
        }
    }
    fit->a = problem->a + shapes[0];
    fit->b = exp(problem->log_b1 + shapes[1]) - 1.0;
    for (size_t knot = 0; knot < PROPENSITY_KNOTS; knot++) {
        fit->deviation[knot] =
            mean[knot] - slopes_at(problem, shapes, false, knot_count(knot)).logit;
    }
    memset(fit->covariance, 0, sizeof fit->covariance);
    for (size_t i = 0; i < SCALES; i++) {
        double distance[PROPENSITY_KNOTS];
        for (size_t knot = 0; knot < PROPENSITY_KNOTS; knot++) {
            distance[knot] = logits[i][knot] - mean[knot];
        }
        add_covariance(problem, &modes[i], weights[i], distance, fit->covariance);
    }
}

void propensity_solve(const struct propensity_curve *defaults, double growth,
                      const struct propensity_bins *bins, struct propensity_fit *fit)
{
    struct mode modes[SCALES] = {0};
    const struct problem problem = {
        .a = defaults->a,
        .log_b1 = log(fmax(defaults->b + 1.0, 1e-6)),
        .log_growth = log(growth),
        .bins = bins,
    };
    for (size_t i = 0; i < SCALES; i++) {
        if (i > 0) {
            /* The next scale's maximum is not far. */
            memcpy(modes[i].at, modes[i - 1].at, sizeof modes[i].at);
        }
        find_mode(&problem, GRID[i].scale, &modes[i]);
    }
    average(&problem, modes, fit);
}
