/* SPDX-License-Identifier: 0BSD */
/* An operation tape: every operation on a `real` adds one record of its two operands and of the derivatives with
   respect to them; the derivatives of results are then swept back to the inputs, or on from the inputs.

   One tape in one thread. Record 0 stands for every constant; the inputs come next. An operation on constants leaves no
   record. Nothing but the sweeps looks at the records, so their cost is that of reading them once. */
#ifndef RW_TAPE_HPP
#define RW_TAPE_HPP

#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <cstring>

struct rw_record {
    double da, db;  /* derivatives with respect to the operands */
    int32_t a, b;   /* their records */
};

struct real {
    double value;
    int32_t at;     /* its record */
    real() : value(0.0), at(0) {}
    real(double v) : value(v), at(0) {}
    real(double v, int32_t k) : value(v), at(k) {}
};

static rw_record *rw_records;
static int32_t rw_size, rw_capacity, rw_inputs;
static double *rw_sweep;            /* derivatives of or by every record, for the sweeps */
static std::size_t rw_sweep_capacity;

static void *rw_grown(void *memory, std::size_t bytes)
{
    void *more = std::realloc(memory, bytes);
    if (more == NULL) {
        std::abort();
    }
    return more;
}

__attribute__((noinline)) static void rw_grow()
{
    rw_capacity = rw_capacity ? 2 * rw_capacity : 4096;
    rw_records = static_cast<rw_record *>(rw_grown(rw_records, sizeof(rw_record) * (std::size_t)rw_capacity));
}

static inline int32_t rw_record_of(double da, int32_t a, double db, int32_t b)
{
    if (__builtin_expect(rw_size == rw_capacity, 0)) {
        rw_grow();
    }
    rw_record *r = rw_records + rw_size;
    r->da = da;
    r->db = db;
    r->a = a;
    r->b = b;
    return rw_size++;
}

static inline real rw_make(double value, const real &a, double da)
{
    return a.at == 0 ? real(value) : real(value, rw_record_of(da, a.at, 0.0, 0));
}

static inline real rw_make(double value, const real &a, double da, const real &b, double db)
{
    return (a.at | b.at) == 0 ? real(value) : real(value, rw_record_of(da, a.at, db, b.at));
}

/* Starts a tape anew: x are its n inputs, with the values p. */
static void rw_independent(int n, const double p[], real x[])
{
    rw_size = 0;
    (void)rw_record_of(0.0, 0, 0.0, 0);
    for (int k = 0; k < n; k++) {
        x[k] = real(p[k], rw_record_of(0.0, 0, 0.0, 0));
    }
    rw_inputs = n;
}

/* Operations on the tape; bytes of so many operations: their records, and m numbers for each in a sweep. */
static inline long rw_operations() { return rw_size - rw_inputs - 1; }
static inline long rw_bytes(long operations, int m)
{
    return (operations + rw_inputs + 1) * (long)(sizeof(rw_record) + sizeof(double) * (std::size_t)m);
}

static double *rw_swept(int width)
{
    const std::size_t wanted = (std::size_t)rw_size * (std::size_t)width;
    if (wanted > rw_sweep_capacity) {
        rw_sweep_capacity = 2 * wanted;
        rw_sweep = static_cast<double *>(rw_grown(rw_sweep, sizeof(double) * rw_sweep_capacity));
    }
    return rw_sweep;
}

/* The jacobian of M results with respect to the inputs, row-major, in one sweep back. What no result depends on is
   passed over, so that an abandoned 0/0 does no harm. */
template <int M> static void rw_reverse(const real y[], double jac[])
{
    double *bar = rw_swept(M);
    std::memset(bar, 0, sizeof(double) * M * (std::size_t)rw_size);
    for (int k = 0; k < M; k++) {
        if (y[k].at != 0) {
            bar[M * y[k].at + k] += 1.0;
        }
    }
    for (int32_t i = rw_size - 1; i > rw_inputs; i--) {
        const double *from = bar + M * i;
        const rw_record *r = rw_records + i;
        bool reached = false;
        for (int k = 0; k < M; k++) {
            reached = reached || from[k] != 0.0;
        }
        if (reached) {
            double *a = bar + M * r->a, *b = bar + M * r->b;
            for (int k = 0; k < M; k++) {
                a[k] += r->da * from[k];
            }
            for (int k = 0; k < M; k++) {
                b[k] += r->db * from[k];
            }
        }
    }
    for (int k = 0; k < M; k++) {
        for (int j = 0; j < rw_inputs; j++) {
            jac[k * rw_inputs + j] = bar[M * (j + 1) + k];
        }
    }
}

/* The same in one sweep forward, in the directions of all N inputs at once. */
template <int N> static void rw_forward(int m, const real y[], double jac[])
{
    double *dot = rw_swept(N);
    std::memset(dot, 0, sizeof(double) * N * (std::size_t)(rw_inputs + 1));
    for (int j = 0; j < N; j++) {
        dot[N * (j + 1) + j] = 1.0;
    }
    for (int32_t i = rw_inputs + 1; i < rw_size; i++) {
        const rw_record *r = rw_records + i;
        const double *a = dot + N * r->a, *b = dot + N * r->b;
        double *to = dot + N * i;
        for (int j = 0; j < N; j++) {
            to[j] = r->b == 0 ? r->da * a[j] : r->a == 0 ? r->db * b[j] : r->da * a[j] + r->db * b[j];
        }
    }
    for (int k = 0; k < m; k++) {
        for (int j = 0; j < N; j++) {
            jac[k * N + j] = dot[N * y[k].at + j];
        }
    }
}

#endif
