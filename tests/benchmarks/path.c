/* Hand-written Markov chains for one path on a periodic lattice, the baselines of the benchmarks.
 *
 * S = sum_i (q_{i+1} - q_i)^2 / (2a) + a (c2 q_i^2 + c4 q_i^4). Single-site Metropolis as in Creutz and Freedman,
 * Ann. Phys. 132 (1981) 427, and Hamiltonian Monte Carlo with unit masses and a jittered leapfrog (Duane et al.,
 * Phys. Lett. B 195 (1987) 216), force and drift fused in one pass. One chain, which stays in the nearest cache; the
 * generator is xoshiro256+ (Blackman and Vigna, ACM Trans. Math. Softw. 47 (2021) 36), eight side by side for normals.
 */
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#define LANES 8
typedef struct { uint64_t s[4][LANES]; } generator;

static inline uint64_t rotl(uint64_t x, int k) { return (x << k) | (x >> (64 - k)); }

static void seed_generator(generator *g, uint64_t seed) {
    for (int i = 0; i < 4; i++)
        for (int l = 0; l < LANES; l++) { /* splitmix64 */
            uint64_t z = (seed += 0x9e3779b97f4a7c15ULL);
            z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9ULL;
            z = (z ^ (z >> 27)) * 0x94d049bb133111ebULL;
            g->s[i][l] = z ^ (z >> 31);
        }
}

/* Uniform in (0, 1); n is a multiple of LANES. The state lives in registers while the loop runs. */
static void fill_uniform(generator *g, double *restrict u, int n) {
    uint64_t a[LANES], b[LANES], c[LANES], d[LANES];
    memcpy(a, g->s[0], sizeof a); memcpy(b, g->s[1], sizeof b); memcpy(c, g->s[2], sizeof c); memcpy(d, g->s[3], sizeof d);
    for (int i = 0; i < n; i += LANES)
        for (int l = 0; l < LANES; l++) {
            uint64_t word = a[l] + d[l], t = b[l] << 17;
            c[l] ^= a[l]; d[l] ^= b[l]; b[l] ^= c[l]; a[l] ^= d[l]; c[l] ^= t;
            d[l] = rotl(d[l], 45);
            u[i + l] = ((double)(int64_t)(word >> 11) + 0.5) * 0x1p-53;
        }
    memcpy(g->s[0], a, sizeof a); memcpy(g->s[1], b, sizeof b); memcpy(g->s[2], c, sizeof c); memcpy(g->s[3], d, sizeof d);
}

/* Box and Muller, in a loop that the compiler turns into vector code: sine and cosine of 2 pi v by their series on an
 * eighth of a turn either way, since calls of sin and cos together are not. */
static void pairs(const double *restrict u, const double *restrict v, double *restrict x, double *restrict y, int n) {
    for (int i = 0; i < n; i++) {
        double r = sqrt(-2.0 * log(u[i])), quarter = __builtin_rint(4 * v[i]), t = 1.5707963267948966 * (4 * v[i] - quarter);
        double z = t * t;
        double s = t * (1 + z * (-1. / 6 + z * (1. / 120 + z * (-1. / 5040 + z * (1. / 362880 + z * (-1. / 39916800
                   + z * (1. / 6227020800.)))))));
        double c = 1 + z * (-.5 + z * (1. / 24 + z * (-1. / 720 + z * (1. / 40320 + z * (-1. / 3628800 + z * (1. / 479001600
                   - z / 87178291200.))))));
        int turn = (int)quarter;
        double odd = turn & 1, a = odd ? c : s, b = odd ? -s : c, sign = turn & 2 ? -1 : 1;
        x[i] = r * sign * b;
        y[i] = r * sign * a;
    }
}

/* n is a multiple of 2 LANES, at most 2^16. */
static void fill_normal(generator *g, double *z, int n) {
    static double u[1 << 16];
    fill_uniform(g, u, n);
    pairs(u, u + n / 2, z, z + n / 2, n / 2);
}

static double potential(double q, double c2, double c4) { return q * q * (c2 + c4 * q * q); }

static void measure(const double *q, int n, double *series, long draw) {
    double m1 = 0, m2 = 0;
    for (int i = 0; i < n; i++) { m1 += q[i]; m2 += q[i] * q[i]; }
    series[2 * draw] = m1 / n;
    series[2 * draw + 1] = m2 / n;
}

/* Updates of every second site, whose neighbours to either side are given: no two of them interact, so the loop is
 * vector code. Returns how many were accepted. */
static double half_sweep(double *restrict q, const double *restrict left, const double *restrict right,
                         const double *restrict u, int n, double hop, double ac2, double ac4, double width) {
    double accepted = 0;
    for (int i = 0; i < n; i++) {
        double old = q[i], new = old + width * (2 * u[i] - 1), o2 = old * old, n2 = new * new;
        double change = hop * (new - old) * (new + old - left[i] - right[i]) + ac2 * (n2 - o2) + ac4 * (n2 * n2 - o2 * o2);
        double accept = u[n + i] < exp(-change) ? 1.0 : 0.0;
        q[i] = accept != 0 ? new : old;
        accepted += accept;
    }
    return accepted;
}

/* Sweeps of Metropolis updates, even sites then odd ones, n even; every sweep leaves (mean q, mean q^2) in series.
 * Returns the acceptance. */
double metropolis(double *q, int n, double a, double c2, double c4, double width, long draws, uint64_t seed,
                  double *series) {
    generator g;
    seed_generator(&g, seed);
    int half = n / 2, padded = (n + LANES - 1) / LANES * LANES;
    double *space = aligned_alloc(64, (3 * padded + 64) * sizeof(double));
    double *even = space + 8, *odd = even + padded / 2 + 16, *u = odd + padded / 2 + 16, accepted = 0;
    for (int i = 0; i < half; i++) { even[i] = q[2 * i]; odd[i] = q[2 * i + 1]; }
    for (long draw = 0; draw < draws; draw++) {
        fill_uniform(&g, u, padded);
        odd[-1] = odd[half - 1];
        accepted += half_sweep(even, odd - 1, odd, u, half, 1 / a, a * c2, a * c4, width);
        fill_uniform(&g, u, padded);
        even[half] = even[0];
        accepted += half_sweep(odd, even, even + 1, u, half, 1 / a, a * c2, a * c4, width);
        double m1 = 0, m2 = 0;
        for (int i = 0; i < half; i++) { m1 += even[i] + odd[i]; m2 += even[i] * even[i] + odd[i] * odd[i]; }
        series[2 * draw] = m1 / n;
        series[2 * draw + 1] = m2 / n;
    }
    for (int i = 0; i < half; i++) { q[2 * i] = even[i]; q[2 * i + 1] = odd[i]; }
    free(space);
    return accepted / ((double)draws * n);
}

static double path_action(const double *q, int n, double a, double c2, double c4) {
    double s = 0;
    for (int i = 0; i < n; i++) {
        double d = q[i + 1] - q[i];
        s += d * d / (2 * a) + a * potential(q[i], c2, c4);
    }
    return s;
}

static void close_ring(double *q, int n) { q[-1] = q[n - 1]; q[n] = q[0]; }

static void kick(double *restrict p, const double *restrict q, int n, double a, double c2, double c4, double e) {
    double hop = 1 / a;
    for (int i = 0; i < n; i++)
        p[i] -= e * (hop * (2 * q[i] - q[i - 1] - q[i + 1]) + a * q[i] * (2 * c2 + 4 * c4 * q[i] * q[i]));
}

static double half_square(const double *p, int n) {
    double s = 0;
    for (int i = 0; i < n; i++) s += p[i] * p[i];
    return 0.5 * s;
}

/* Trajectories of `steps` leapfrogs of size `step` (1 + 0.2 u); q has n sites. Returns the acceptance. */
double hamiltonian(double *start, int n, double a, double c2, double c4, double step, int steps, long draws,
                   uint64_t seed, double *series) {
    generator g;
    seed_generator(&g, seed);
    int padded = (n + 2 * LANES - 1) / (2 * LANES) * (2 * LANES);
    double *space = aligned_alloc(64, (3 * padded + 64) * sizeof(double));
    double *q = space + 8, *p = q + padded + 16, *kept = p + padded + 8, chance[2 * LANES];
    memcpy(q, start, n * sizeof(double));
    close_ring(q, n);
    double s = path_action(q, n, a, c2, c4);
    long accepted = 0;
    for (long draw = 0; draw < draws; draw++) {
        fill_uniform(&g, chance, 2 * LANES);
        fill_normal(&g, p, padded);
        memcpy(kept, q, n * sizeof(double));
        double before = s + half_square(p, n), e = step * (1 + 0.2 * (2 * chance[0] - 1));
        kick(p, q, n, a, c2, c4, 0.5 * e);
        for (int k = 1; k <= steps; k++) {
            for (int i = 0; i < n; i++) q[i] += e * p[i];
            close_ring(q, n);
            kick(p, q, n, a, c2, c4, k < steps ? e : 0.5 * e);
        }
        double after = path_action(q, n, a, c2, c4), change = after + half_square(p, n) - before;
        if (change <= 0 || chance[1] < exp(-change)) { s = after; accepted++; }
        else { memcpy(q, kept, n * sizeof(double)); close_ring(q, n); }
        measure(q, n, series, draw);
    }
    memcpy(start, q, n * sizeof(double));
    free(space);
    return (double)accepted / draws;
}
