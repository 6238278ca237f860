/* SPDX-License-Identifier: 0BSD */

typedef struct {
    double x, g, slope; /* the residual and its slope at x */
} rw_sample;

static rw_sample rw_evaluate(const double p[], double x, rw_point *r)
{
    rw_sample s;
    s.x = x;
    s.g = rw_residual(p, x, &s.slope);
    r->evaluations += 1;
    return s;
}

static void rw_clear(rw_point *r)
{
    int k;
    for (k = 0; k < RW_M; k++) {
        r->y[k] = (double)NAN;
    }
    r->residual = (double)NAN;
    r->slope = (double)NAN;
    r->error_bound = (double)NAN;
    r->lower = (double)NAN;
    r->upper = (double)NAN;
    r->iterations = 0;
    r->evaluations = 0;
    r->status = RW_NOT_FINITE;
}

static int rw_fail(rw_point *r, int status, double lower, double upper)
{
    r->lower = lower;
    r->upper = upper;
    r->status = status;
    return status;
}

/* Doubles numbered in ascending order; 0.0 and -0.0 share the number 0. */
static int64_t rw_ordinal(double x)
{
    int64_t bits;
    memcpy(&bits, &x, sizeof bits);
    return bits >= 0 ? bits : INT64_MIN - bits;
}

static double rw_from_ordinal(int64_t n)
{
    const int64_t bits = n >= 0 ? n : INT64_MIN - n;
    double x;
    memcpy(&x, &bits, sizeof x);
    return x;
}

/* How many steps from double to double lead from a up to b: so many that it needs all bits. */
static uint64_t rw_gap(double a, double b)
{
    return (uint64_t)rw_ordinal(b) - (uint64_t)rw_ordinal(a);
}

static int rw_between(double x, double a, double b)
{
    return (a < x && x < b) || (b < x && x < a);
}

/* A finite slope in the direction in which the residual changes sign. Beside an odd pole the direction is wrong. */
static int rw_usable(rw_sample s, double rising)
{
    return isfinite(s.slope) && s.slope * rising > 0.0;
}

/* Zero up to rounding. A bound that is not finite says nothing, nor does the huge one beside a pole, where the residual
   is larger than the largest one known on this bracket. */
static int rw_is_zero(double g, double bound, double largest)
{
    return isfinite(bound) && fabs(g) <= bound && fabs(g) <= largest;
}

#if RW_OPEN_LOWER || RW_OPEN_UPPER
/* The sample nearest to an open end at which the residual is finite and its sign is certain. The offsets are the
   first one times 2, 2^3, 2^7, 2^15, ...: twelve of them reach from a subnormal to any number.
   Returns 0 or a status. */
static int rw_enter(const double p[], double end, double far, double rounding, rw_sample *s, rw_point *r)
{
    const double half = 0.5 * far - 0.5 * end;
    double offset = fmax(2.0 * fabs(nextafter(end, far) - end), 2.0 * rounding);
    double bound, slope_rounding, curvature;
    int growth, status = RW_NOT_FINITE;

    for (growth = 1; growth <= 2048; growth *= 2) {
        s->x = end + copysign(fmin(offset, fabs(half)), half);
        if (!rw_between(s->x, end, far)) {
            return RW_NO_SIGN_CHANGE;
        }
        *s = rw_evaluate(p, s->x, r);
        if (isfinite(s->g)) {
            bound = rw_rounding(p, s->x, &slope_rounding, &curvature);
            if (fabs(s->g) > bound) {
                return 0;
            }
            status = RW_NO_SIGN_CHANGE;
        }
        if (offset >= fabs(half)) {
            break;
        }
        offset = offset < ldexp(fabs(half), -growth) ? ldexp(offset, growth) : fabs(half);
    }
    return status;
}
#endif

/* The next point to try, from models of the residual between the two ends of the bracket, best and other. Where none
   serves the result is not inside the bracket. In this order:
   - the cubic through x(g) and its slopes at the two points evaluated last (Hermite's interpolation of the inverse
     function; order 1 + sqrt(3)), if it agrees with Newton's step within a factor of 16. With overshoot it goes
     past the root by twice the two steps' difference, to bring in the far end of the bracket too;
   - the power law c*(x - a)^q + d through both ends with the steeper one's slope: exact for a monomial, and good
     where the slope at the other end is zero;
   - Newton's step. */
static double rw_aim(rw_sample best, rw_sample previous, rw_sample other, double rising, int overshoot)
{
    const int other_steeper = rw_usable(other, rising)
                              && !(rw_usable(best, rising) && fabs(best.slope) >= fabs(other.slope));
    const rw_sample steep = other_steeper ? other : best;
    const rw_sample anchor = other_steeper ? best : other;
    double newton = 0.0, hermite, power, t, x;

    if (rw_usable(best, rising)) {
        newton = -best.g / best.slope;
        if (rw_usable(previous, rising) && fabs(previous.g - best.g) > 0.0) {
            t = best.g / (best.g - previous.g);
            hermite = (1.0 - t) * (1.0 - t) * newton
                    + t * t * ((3.0 - 2.0 * t) * (previous.x - best.x) - previous.g / previous.slope);
            if ((hermite < 0.0) == (newton < 0.0) && fabs(hermite) < 16.0 * fabs(newton)
                && fabs(newton) < 16.0 * fabs(hermite)) {
                x = best.x + hermite + copysign(2.0 * fabs(hermite - newton), hermite);
                if (overshoot && rw_between(x, best.x, other.x)) {
                    return x;
                }
                x = best.x + hermite;
                if (rw_between(x, best.x, other.x)) {
                    return x;
                }
            }
        }
    }
    if (!overshoot && rw_usable(steep, rising)) {
        power = steep.slope * ((steep.x - anchor.x) / (steep.g - anchor.g));
        if (power > 0x1p-10) {
            t = pow(anchor.g / (anchor.g - steep.g), 1.0 / power);
            x = anchor.x + t * (steep.x - anchor.x);
            if (rw_between(x, best.x, other.x)) {
                return x;
            }
        }
    }
    return best.x + newton;
}

/* One side of an adjacent pair of doubles comes down to zero between them: its residual is zero up to rounding, or at
   most slope * width, and below 64 times that for cube-root-like ones. Not so beside a step or a pole. */
static int rw_descends(const double p[], rw_sample side, double rising, double width, double largest)
{
    double slope_rounding, curvature;
    const double bound = rw_rounding(p, side.x, &slope_rounding, &curvature);
    return rw_is_zero(side.g, bound, largest)
           || (side.slope * rising > 0.0 && fabs(side.g) <= 64.0 * fabs(side.slope) * width);
}

/* Narrows the bracket between two samples of opposite signs down to a root, and leaves the root in best.
   Returns 0 or a status.
   The number of doubles between low and high at least halves over every three evaluations: two points from models of
   the residual, or one of them the arithmetic middle, then the middle double. So the
   ends become adjacent within three evaluations for every bit of a double, but for those at which the residual is not
   a number. A last step of Newton's may follow, for its accuracy. */
static int rw_narrow(const double p[], rw_sample *low, rw_sample *high, rw_sample *best, double start, rw_point *r)
{
    const double rising = high->g > 0.0 ? 1.0 : -1.0;
    const double largest = fmax(fabs(low->g), fabs(high->g));
    rw_sample previous, latest;
    uint64_t gap = rw_gap(low->x, high->x), gap_left;
    int tries = 0;  /* evaluations since the gap was halved */
    int plain = 0;  /* the last point was the arithmetic middle */
    int holes = 0;  /* evaluations in a row that were not a number */
    int slow = 0;   /* the last model was poor: beside a simple pole Newton's step leaves half of the residual */
    int closing;    /* the next point is the last, by the model */
    int zero;       /* and best is zero up to rounding */
    int fast, improved;
    double x, step, bend, share, bound, slope_rounding, curvature;
    double beside = 0.0; /* the residual one double beside the root, if nothing jumps there */

    *best = fabs(low->g) < fabs(high->g) ? *low : *high;
    previous = fabs(low->g) < fabs(high->g) ? *high : *low;
    for (;;) {
        /* low.x < high.x, low.g and high.g are nonzero and of opposite signs; best is one of the two. */
        if (rw_gap(low->x, high->x) <= 1u) {
            bound = rw_rounding(p, best->x, &slope_rounding, &curvature);
            if (rw_is_zero(best->g, bound, largest)) {
                return 0;
            }
            return rw_descends(p, *low, rising, high->x - low->x, largest)
                    && rw_descends(p, *high, rising, high->x - low->x, largest) ? 0 : RW_JUMP;
        }
        x = best->x;
        closing = 0;
        zero = 0;
        if (rw_usable(*best, rising)) {
            step = -best->g / best->slope;
            if (fabs(step) <= sqrt(DBL_EPSILON) * fabs(best->x)) {
                /* Newton's step leaves the error bend/2 * step. It is the last one if that is below half an ulp, or if
                   the rest is rounding. Beside a pole at an open end, where the step is as small, bend is 1 or more. */
                bound = rw_rounding(p, best->x, &slope_rounding, &curvature);
                bend = fabs(curvature * step / best->slope);
                zero = rw_is_zero(best->g, bound, largest);
                closing = bend <= 0.25 && (zero || bend * fabs(step) <= 0.5 * DBL_EPSILON * fabs(best->x));
                if (closing) {
                    x = best->x + step;
                    closing = rw_between(x, low->x, high->x);
                    beside = fabs(best->g) + fabs(best->slope) * DBL_EPSILON * fabs(best->x);
                    zero = zero || !(fabs(x - best->x) > 0.0); /* or as near to it as doubles come */
                    if (closing ? zero && fabs(step) <= 4.0 * DBL_EPSILON * fabs(best->x)
                                : zero || fabs(step < 0.0 ? low->g : high->g) <= beside) {
                        return 0;
                    }
                }
            }
        }
        if (r->evaluations >= RW_LIMIT) {
            return closing && zero ? 0 : RW_ITERATION_LIMIT;
        }

        fast = closing;
        if (!closing && !slow && holes == 0 && tries < 2) {
            x = r->iterations == 0 && !isnan(start)
                ? start
                : rw_aim(*best, previous, (best->g < 0.0) == (low->g < 0.0) ? *high : *low, rising, tries == 1);
            fast = rw_between(x, low->x, high->x);
        }
        plain = !fast && holes == 0 && tries < 2 && !plain;
        if (plain) {
            x = low->x < 0.0 && high->x > 0.0 ? 0.5 * (low->x + high->x) : low->x + 0.5 * (high->x - low->x);
        }
        if (holes > 0) { /* nearer and nearer to either end in turn, where the residual is known to be a number */
            share = ldexp(1.0, -1 - (holes + 1) / 2);
            x = holes % 2 == 1 ? (1.0 - share) * low->x + share * high->x : share * low->x + (1.0 - share) * high->x;
        }
        if (!rw_between(x, low->x, high->x)) {
            x = rw_from_ordinal(rw_ordinal(low->x) + (int64_t)(rw_gap(low->x, high->x) / 2u));
        }

        latest = rw_evaluate(p, x, r);
        r->iterations += 1;
        tries += 1;
        if (isnan(latest.g)) {
            holes += 1;
            if (closing && zero) {
                return 0;
            }
            if (holes > 8) {
                return RW_NOT_FINITE;
            }
            continue;
        }
        holes = 0;
        improved = fabs(latest.g) < fabs(best->g);
        if (!(fabs(latest.g) > 0.0) || (closing && improved)) {
            *best = latest;
            return 0;
        }
        if (closing && (zero || fabs(latest.g) <= beside)) {
            return 0;
        }
        if (fast && !improved) {
            bound = rw_rounding(p, best->x, &slope_rounding, &curvature);
            if (rw_is_zero(best->g, bound, largest)) {
                return 0;
            }
        }
        slow = fast && fabs(latest.g) > 0.4 * fabs(best->g);
        if ((latest.g < 0.0) == (low->g < 0.0)) {
            *low = latest;
        } else {
            *high = latest;
        }
        if (improved || best->x < low->x || best->x > high->x) {
            previous = *best;
            *best = latest;
        } else {
            previous = latest;
        }
        gap_left = rw_gap(low->x, high->x);
        if (gap_left <= gap - gap / 2u) {
            gap = gap_left;
            tries = 0;
        }
    }
}

/* How far from the root x, towards one end of the bracket, the residual's sign may be mere rounding: the distance 2^k
   of the nearest point at which it surely has the sign expected there, found by bisection of k, or of the end. */
static double rw_reach(const double p[], double x, double end, int negative, rw_point *r)
{
    double reach = fabs(end - x), bound, slope_rounding, curvature;
    rw_sample s;
    int unsure, sure, k;

    if (!(reach > 0.0)) {
        return 0.0;
    }
    (void)frexp(fmax(fabs(x), DBL_MIN), &unsure);
    unsure -= DBL_MANT_DIG + 1; /* half the spacing of doubles at x */
    (void)frexp(0.5 * end - 0.5 * x, &sure);
    sure += 1; /* 2^sure exceeds the distance of the end */
    while (sure - unsure > 1 && r->evaluations < RW_LIMIT) {
        k = unsure + (sure - unsure) / 2;
        s.x = x + copysign(ldexp(1.0, k), end - x);
        if (!rw_between(s.x, x, end)) {
            sure = k;
            continue;
        }
        s = rw_evaluate(p, s.x, r);
        bound = rw_rounding(p, s.x, &slope_rounding, &curvature);
        if (fabs(s.g) > bound && (s.g < 0.0) == negative) {
            sure = k;
            reach = fabs(s.x - x);
        } else {
            unsure = k;
        }
    }
    return reach;
}

/* By what share of itself the slope changes within the error of a root at x: |g_xx| * error / |g_x|, or where the second
   derivative overflows (beside 1e-300, say) what the slopes at both ends tell. INFINITY where the slope is within its
   own rounding error. Newton-Kantorovich: up to 1/2 the root lies within 2*error / (1 + sqrt(1 - 2*bend)) of x. */
static double rw_bend(const double p[], double x, double g, double slope, double rounding, double slope_rounding,
                      double curvature)
{
    const double least = fabs(slope) - slope_rounding;
    const double error = (fabs(g) + rounding) / least;
    double before, after;
    if (!(least > 0.0 && isfinite(least))) {
        return (double)INFINITY;
    }
    if (isfinite(curvature)) {
        return fabs(curvature) * error / least;
    }
    (void)rw_residual(p, x - error, &before);
    (void)rw_residual(p, x + error, &after);
    return fabs(before - slope) / least + fabs(after - slope) / least;
}

/* No slope to speak of: the curve is not straight within the error of the root. */
static int rw_is_flat(double bend)
{
    return !(bend <= 0.25);
}

/* Fills r for the root: error bound, enclosing bracket and caveats. end holds the bracket, rounding its uncertainty;
   the residual is negative towards end[i] if negative[i]; at_end is the uncertainty of the root as an end itself. */
static int rw_certify(const double p[], rw_sample root, const double end[2], const double rounding[2],
                      const int negative[2], double at_end, rw_point *r)
{
    double slope_rounding, curvature, error, farthest;
    const double bound = rw_rounding(p, root.x, &slope_rounding, &curvature);
    const double bend = rw_bend(p, root.x, root.g, root.slope, bound, slope_rounding, curvature);

    r->status = 0;
    if (!rw_is_flat(bend)) {
        error = (fabs(root.g) + bound) / (fabs(root.slope) - slope_rounding);
        /* 2 / (1 + sqrt(1 - 2*bend)) < 1 + bend for bend <= 1/4; 2^-10 is for the rounding of these lines. */
        error *= (1.0 + bend) * (1.0 + 0x1p-10);
    } else {
        r->status |= RW_FLAT;
        error = 0.0;
        if (!(fabs(root.g) + bound <= 0.0)) {
            error = rw_reach(p, root.x, end[0], negative[0], r);
            error = fmax(error, rw_reach(p, root.x, end[1], negative[1], r));
        }
    }
    if (fabs(root.g) + bound > 0.0) { /* not exact, even where the bound underflows */
        error = fmax(error, DBL_MIN * DBL_EPSILON);
    }
    error += at_end;
    farthest = fmax(root.x - end[0] + rounding[0], end[1] - root.x + rounding[1]);
    r->error_bound = error < farthest ? error : farthest;
    r->y[0] = root.x;
    r->residual = root.g;
    r->slope = root.slope;
    r->lower = end[0];
    r->upper = end[1];
    if (root.x - r->error_bound > end[0]) {
        r->lower = r->error_bound > 0.0 ? nextafter(root.x - r->error_bound, -HUGE_VAL) : root.x;
    }
    if (root.x + r->error_bound < end[1]) {
        r->upper = r->error_bound > 0.0 ? nextafter(root.x + r->error_bound, HUGE_VAL) : root.x;
    }
#if RW_SWITCHES
    if (rw_kink(p, root.x, r->error_bound)) {
        r->status |= RW_KINK;
    }
#endif
    return r->status;
}

/* Finds the root in the bracket and fills r, which comes cleared, but for the outputs.
   start is where to look first, NAN for nowhere. */
static int rw_locate(const double p[], double start, rw_point *r)
{
    double end[2], rounding[2], slack, slope_rounding, curvature, swap;
    rw_sample low, high, root;
    int negative[2], status, i;

    rw_bracket(p, end, rounding);
    if (!isfinite(end[0]) || !isfinite(end[1])) {
        return rw_fail(r, RW_NOT_FINITE, (double)NAN, (double)NAN);
    }
    for (i = 0; i < 2; i++) { /* an unbounded rounding error says nothing about where a root may be */
        if (!isfinite(rounding[i])) {
            rounding[i] = 0.0;
        }
    }
    if (end[0] > end[1]) { /* ends that cross by no more than their rounding are equal */
        if (!(end[0] - end[1] <= rounding[0] + rounding[1])) {
            return rw_fail(r, RW_BAD_BRACKET, (double)NAN, (double)NAN);
        }
        swap = end[0];
        end[0] = end[1];
        end[1] = swap;
        swap = rounding[0];
        rounding[0] = rounding[1];
        rounding[1] = swap;
    }

#if RW_OPEN_LOWER
    status = rw_enter(p, end[0], end[1], rounding[0], &low, r);
    rounding[0] = 0.0;
#else
    low = rw_evaluate(p, end[0], r);
    status = isnan(low.g) ? RW_NOT_FINITE : 0;
#endif
    if (status < 0) {
        return rw_fail(r, status, end[0], end[1]);
    }
#if RW_OPEN_UPPER
    status = rw_enter(p, end[1], end[0], rounding[1], &high, r);
    rounding[1] = 0.0;
#else
    high = rw_evaluate(p, end[1], r);
    status = isnan(high.g) ? RW_NOT_FINITE : 0;
#endif
    if (status < 0) {
        return rw_fail(r, status, end[0], end[1]);
    }

    negative[0] = low.g < 0.0;
    negative[1] = high.g < 0.0;
    if (!(fabs(low.g) > 0.0)) {
        return rw_certify(p, low, end, rounding, negative, rounding[0], r);
    }
    if (!(fabs(high.g) > 0.0)) {
        return rw_certify(p, high, end, rounding, negative, rounding[1], r);
    }
    if (negative[0] == negative[1]) { /* no root but at an end, where zero up to rounding counts as zero */
        i = fabs(high.g) < fabs(low.g);
        root = i ? high : low;
        slack = rw_rounding(p, root.x, &slope_rounding, &curvature);
        if (rounding[i] > 0.0) {
            slack += fabs(root.slope) * rounding[i];
        }
        if (rw_is_zero(root.g, slack, fabs(root.g))) {
            return rw_certify(p, root, end, rounding, negative, rounding[i], r);
        }
        return rw_fail(r, RW_NO_SIGN_CHANGE, end[0], end[1]);
    }

#if RW_START
    if (isnan(start)) {
        start = rw_start(p);
    }
#endif
    status = rw_narrow(p, &low, &high, &root, start, r);
    if (status < 0) {
        return rw_fail(r, status, low.x, high.x);
    }
    return rw_certify(p, root, end, rounding, negative, 0.0, r);
}
