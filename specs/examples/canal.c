/* A flood wave in a drainage canal: a small simulator with a compiled closure inside.

   The canal is cut into reaches. Each stores what flows in and not yet out, and drains as uniform flow does at its depth,
   so its depth is the root of Manning's equation for its discharge Q: normal_depth. An implicit Euler step asks for
   the Q with

       length*area(depth(Q)) = volume before + dt*(inflow - Q)

   which Newton's method finds; its slope needs d(depth)/dQ, which is what the tangent gives, at the root just found,
   without solving again. Each solve starts at the depth of the one before: a warm start.

   The canal and the storm are invented. Flood protection, freeboard and dam safety follow local codes and licensed
   practice; this is an example of programming. */
#include "normal_depth.h"

#include <math.h>
#include <stdio.h>

enum { REACHES = 5, HOURS = 24, STEPS_PER_HOUR = 12 };

static const double LENGTH = 2000.0, DT = 3600.0/STEPS_PER_HOUR;        /* m, s */
static const double WIDTH = 3.0, SIDE = 1.5, ROUGHNESS = 0.03, SLOPE = 5e-4;
static const double BASE = 2.0, STORM = 18.0, STORM_HOURS = 6.0;        /* m^3/s, m^3/s, h */

typedef struct {
    double volume, discharge, depth;                                    /* m^3, m^3/s, m */
} reach;

typedef struct {
    long solves, evaluations;
} counts;

static double area(double depth)
{
    return (WIDTH + SIDE*depth)*depth;
}

static double inflow(double hours)
{
    const double s = hours < STORM_HOURS ? sin(3.141592653589793*hours/STORM_HOURS) : 0.0;
    return BASE + STORM*s*s;
}

/* Depth of uniform flow and its derivative by the discharge. Returns the status: negative without a root. */
static int uniform_flow(double discharge, double start, double *depth, double *depth_q, counts *c)
{
    const double p[6] = { discharge, WIDTH, SIDE, ROUGHNESS, SLOPE, 1.0 }, along_q[6] = { 1.0 };
    double y_dot[2];
    normal_depth_point r;
    const int status = normal_depth_solve(p, start, &r);
    c->solves += 1;
    c->evaluations += r.evaluations;
    if (status >= 0) {
        normal_depth_tangent(p, r.y[0], along_q, y_dot);
        *depth = r.y[0];
        *depth_q = y_dot[0];
    }
    return status;
}

/* One implicit Euler step of one reach. Returns 0, or a negative status of the closure. */
static int step(reach *at, double inflow_rate, int warm, counts *c)
{
    double q = at->discharge, depth = at->depth, depth_q, change = q;
    int k, status;
    for (k = 0; k < 50 && fabs(change) > 1e-13*q; k++) {
        status = uniform_flow(q, warm ? depth : (double)NAN, &depth, &depth_q, c);
        if (status < 0) {
            return status;
        }
        change = (at->volume + DT*(inflow_rate - q) - LENGTH*area(depth))
            / (LENGTH*(WIDTH + 2.0*SIDE*depth)*depth_q + DT);
        change = fmax(change, -0.5*q);                                  /* the discharge stays positive */
        q += change;
    }
    at->volume += DT*(inflow_rate - q);
    at->discharge = q;
    at->depth = depth;
    return 0;
}

/* Runs the storm through the canal. peak holds each reach at its highest discharge, hour when that was; missing is the
   water that the books lose, as a share of what flowed in. Returns 0, or a negative status of the closure. */
static int simulate(int warm, reach peak[REACHES], double hour[REACHES], double *missing, counts *c)
{
    reach canal[REACHES];
    double depth = (double)NAN, depth_q, in = 0.0, out = 0.0, stored = 0.0;
    int i, k, status = uniform_flow(BASE, (double)NAN, &depth, &depth_q, c);
    for (i = 0; i < REACHES; i++) {
        canal[i].volume = LENGTH*area(depth);
        canal[i].discharge = BASE;
        canal[i].depth = depth;
        peak[i] = canal[i];
        hour[i] = 0.0;
        stored -= canal[i].volume;
    }
    for (k = 1; k <= HOURS*STEPS_PER_HOUR && status >= 0; k++) {
        const double now = (double)k/STEPS_PER_HOUR;
        double rate = inflow(now);
        in += DT*rate;
        for (i = 0; i < REACHES && status >= 0; i++) {
            status = step(&canal[i], rate, warm, c);
            rate = canal[i].discharge;
            if (rate > peak[i].discharge) {
                peak[i] = canal[i];
                hour[i] = now;
            }
        }
        out += DT*rate;
    }
    for (i = 0; i < REACHES; i++) {
        stored += canal[i].volume;
    }
    *missing = fabs(in - out - stored)/in;
    return status < 0 ? status : 0;
}

int main(void)
{
    reach peak[REACHES], same[REACHES];
    double hour[REACHES], missing;
    counts warm = { 0, 0 }, cold = { 0, 0 };
    int i;
    if (simulate(1, peak, hour, &missing, &warm) < 0 || simulate(0, same, hour, &missing, &cold) < 0) {
        puts("a reach has no uniform flow: outside what Manning's equation is meant for");
        return 1;
    }
    puts("reach   peak (m^3/s)   depth (m)   after (h)");
    for (i = 0; i < REACHES; i++) {
        printf("%5d   %12.4f   %9.4f   %9.2f\n", i + 1, peak[i].discharge, peak[i].depth, hour[i]);
    }
    printf("water lost by the books: %s\n", missing < 1e-12 ? "none" : "some");
    printf("evaluations a solve: %.1f from warm starts, %.1f without\n", (double)warm.evaluations/(double)warm.solves,
           (double)cold.evaluations/(double)cold.solves);
    return 0;
}
