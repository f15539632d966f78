/* The yardstick: one op-amp with slew and rails and two diodes, in C, for exactly these sizes.
 *
 * Uniform steps of the trapezoid, Newton's method to the same tolerance, the same exponential, no error control.
 * N states, four controls (op-amp: v+ - v-, w; two junction voltages), three currents. Matrices by columns, rows
 * filled up to a multiple of eight, so that the compiler can use the widest registers it has.
 */
#include <math.h>
#include <stdint.h>
#include <string.h>

#define K 4
#define M 3
#define Z (N + K + M)
#define ROWS(count) (((count) + 7) / 8 * 8)

static inline double fast_exp(double x)
{
    const double rounding = 6755399441055744.0;
    x = x > -708.0 ? x : -708.0;
    x = x < 709.0 ? x : 709.0;
    double shifted = fma(x, 1.4426950408889634, rounding);
    double count = shifted - rounding;
    double r = fma(count, -0.6931471803691238, x);
    r = fma(count, -1.9082149292705877e-10, r);
    double s = r * r;
    double even = 1.0 / 479001600.0, odd = 1.0 / 6227020800.0;
    even = fma(even, s, 1.0 / 3628800.0);
    even = fma(even, s, 1.0 / 40320.0);
    even = fma(even, s, 1.0 / 720.0);
    even = fma(even, s, 1.0 / 24.0);
    even = fma(even, s, 0.5);
    even = fma(even, s, 1.0);
    odd = fma(odd, s, 1.0 / 39916800.0);
    odd = fma(odd, s, 1.0 / 362880.0);
    odd = fma(odd, s, 1.0 / 5040.0);
    odd = fma(odd, s, 1.0 / 120.0);
    odd = fma(odd, s, 1.0 / 6.0);
    odd = fma(odd, s, 1.0);
    double value = fma(odd, r, even);
    int64_t bits, shift;
    memcpy(&bits, &value, 8);
    memcpy(&shift, &shifted, 8);
    bits += (int64_t)((uint64_t)shift << 52);
    memcpy(&value, &bits, 8);
    return value;
}

typedef struct {
    double H[Z + 3][ROWS(N + K)]; /* history (X, c, j, u0, u1, 1) to the root's right side (K) and the new X (N) */
    double Y[K][K], NJ[K][M];
    double Q[M][ROWS(N)];            /* new currents to the new X */
    double ABE[Z + 2][ROWS(N)];      /* (X, c, j, u, 1) to dX/dt */
    double R0[N][K], S0[K], Y0[K];   /* at rest the controls follow from X alone: Y0 c = R0 X + S0 u */
    double out[Z], out_u[2];
    double opamp[6], junction[2][3]; /* SR/2piGBW, 1/A0, swings, rails; IS, nVt, knee */
    double scales[K], high[K], low[K];
} Circuit;

static inline void devices(const Circuit *p, const double *c, double *j, double g[M][2])
{
    const double *a = p->opamp;
    double top = a[4] - a[2], bottom = a[5] + a[3];
    double e = fast_exp(-2.0 * fabs(c[0] / a[0]));
    double t = copysign((1.0 - e) / (1.0 + e), c[0] / a[0]);
    double x = (c[1] - top) / 0.05, y = (bottom - c[1]) / 0.05;
    double over = fast_exp(x < 60.0 ? x : 60.0), under = fast_exp(y < 60.0 ? y : 60.0);
    double over_line = over * (1.0 + (x > 60.0 ? x - 60.0 : 0.0));
    double under_line = under * (1.0 + (y > 60.0 ? y - 60.0 : 0.0));
    j[0] = a[0] * t - (c[1] - 0.5 * (top + a[2] + bottom - a[3])) * a[1] - a[0] * (over_line - under_line);
    g[0][0] = 1.0 - t * t;
    g[0][1] = -a[1] - a[0] * (over / 0.05 + under / 0.05);
    for (int d = 0; d < 2; d++) {
        const double *b = p->junction[d];
        double v = c[2 + d] / b[1];
        double below = fast_exp(v < b[2] ? v : b[2]);
        j[1 + d] = b[0] * (below * (1.0 + (v > b[2] ? v - b[2] : 0.0)) - 1.0);
        g[1 + d][0] = b[0] * below / b[1];
        g[1 + d][1] = 0.0;
    }
}

static inline int solve(double a[K][K], double *b)
{
    for (int k = 0; k < K; k++) {
        int pivot = k;
        for (int i = k + 1; i < K; i++)
            if (fabs(a[i][k]) > fabs(a[pivot][k]))
                pivot = i;
        if (a[pivot][k] == 0.0)
            return 0;
        if (pivot != k) {
            for (int j = k; j < K; j++) {
                double t = a[k][j];
                a[k][j] = a[pivot][j];
                a[pivot][j] = t;
            }
            double t = b[k];
            b[k] = b[pivot];
            b[pivot] = t;
        }
        double inverse = 1.0 / a[k][k];
        for (int i = k + 1; i < K; i++) {
            double f = a[i][k] * inverse;
            for (int j = k + 1; j < K; j++)
                a[i][j] -= f * a[k][j];
            b[i] -= f * b[k];
        }
        a[k][k] = inverse;
    }
    for (int k = K - 1; k >= 0; k--) {
        for (int j = k + 1; j < K; j++)
            b[k] -= a[k][j] * b[j];
        b[k] *= a[k][k];
    }
    return 1;
}

/* Crosses `steps` steps of h seconds; u and du (per step of h) at 0 ... steps; out: the output's mean over
 * each step, of the cubic through values and slopes.
 * z (X, c, j), c_slope and c_bend are the condition; returns the Newton iterations, negative when one fails. */
int64_t handwritten(const Circuit *p, const double *u, const double *du, double h, int64_t steps, double *z,
                    double *c_slope, double *c_bend, double *out)
{
    int64_t iterations = 0;
    double y_before = p->out_u[0] * u[0] + p->out_u[1], d_before = p->out_u[0] * du[0];
    for (int k = 0; k < Z; k++)
        y_before += p->out[k] * z[k];
    for (int64_t at = 0; at < steps; at++) {
        double target[ROWS(N + K)], j[M], g[M][2], c[K];
        for (int row = 0; row < ROWS(N + K); row++)
            target[row] = p->H[Z + 2][row];
        for (int k = 0; k < Z; k++)
            for (int row = 0; row < ROWS(N + K); row++)
                target[row] += p->H[k][row] * z[k];
        for (int row = 0; row < ROWS(N + K); row++)
            target[row] += p->H[Z][row] * u[at] + p->H[Z + 1][row] * u[at + 1];
        for (int k = 0; k < K; k++)
            c[k] = z[N + k] + h * (c_slope[k] + h * c_bend[k]);
        int settled = 0;
        for (int trial = 0; trial < 12 && !settled; trial++) {
            double a[K][K], step[K];
            iterations++;
            devices(p, c, j, g);
            for (int row = 0; row < K; row++) {
                step[row] = target[row];
                for (int k = 0; k < K; k++)
                    step[row] -= p->Y[row][k] * c[k];
                for (int k = 0; k < M; k++)
                    step[row] -= p->NJ[row][k] * j[k];
                a[row][0] = p->Y[row][0] + p->NJ[row][0] * g[0][0];
                a[row][1] = p->Y[row][1] + p->NJ[row][0] * g[0][1];
                a[row][2] = p->Y[row][2] + p->NJ[row][1] * g[1][0];
                a[row][3] = p->Y[row][3] + p->NJ[row][2] * g[2][0];
            }
            if (!solve(a, step))
                return -1;
            settled = 1;
            for (int k = 0; k < K; k++)
                settled &= fabs(step[k]) < 1e-3 * p->scales[k];
            if (settled) {
                j[0] += g[0][0] * step[0] + g[0][1] * step[1];
                j[1] += g[1][0] * step[2];
                j[2] += g[2][0] * step[3];
            }
            for (int k = 0; k < K; k++) {
                double ahead = c[k] + step[k];
                if (!settled && step[k] > 2.0 * p->scales[k] && ahead > p->high[k]) {
                    double base = c[k] > p->high[k] ? c[k] : p->high[k];
                    ahead = base + p->scales[k] * log(1.0 + (ahead - base) / p->scales[k]);
                } else if (!settled && step[k] < -2.0 * p->scales[k] && ahead < p->low[k]) {
                    double base = c[k] < p->low[k] ? c[k] : p->low[k];
                    ahead = base - p->scales[k] * log(1.0 + (base - ahead) / p->scales[k]);
                }
                c[k] = ahead;
            }
        }
        if (!settled)
            return -1;
        double X[ROWS(N)], slope[ROWS(N)];
        for (int row = 0; row < N; row++)
            X[row] = target[K + row];
        for (int row = N; row < ROWS(N); row++)
            X[row] = 0.0;
        for (int k = 0; k < M; k++)
            for (int row = 0; row < ROWS(N); row++)
                X[row] += p->Q[k][row] * j[k];
        memcpy(z, X, N * sizeof(double));
        memcpy(z + N, c, K * sizeof(double));
        memcpy(z + N + K, j, M * sizeof(double));
        for (int row = 0; row < ROWS(N); row++)
            slope[row] = p->ABE[Z + 1][row] + p->ABE[Z][row] * u[at + 1];
        for (int k = 0; k < Z; k++)
            for (int row = 0; row < ROWS(N); row++)
                slope[row] += p->ABE[k][row] * z[k];
        for (int k = 0; k < K; k++) {
            double now = p->S0[k] * du[at + 1] / h;
            for (int row = 0; row < N; row++)
                now += p->R0[row][k] * slope[row];
            now /= p->Y0[k];
            c_bend[k] = 0.5 * (now - c_slope[k]) / h;
            c_slope[k] = now;
        }
        double change[M] = {g[0][0] * c_slope[0] + g[0][1] * c_slope[1], g[1][0] * c_slope[2], g[2][0] * c_slope[3]};
        double y = p->out_u[0] * u[at + 1] + p->out_u[1], d = p->out_u[0] * du[at + 1];
        for (int k = 0; k < Z; k++)
            y += p->out[k] * z[k];
        for (int k = 0; k < N; k++)
            d += h * p->out[k] * slope[k];
        for (int k = 0; k < K; k++)
            d += h * p->out[N + k] * c_slope[k];
        for (int k = 0; k < M; k++)
            d += h * p->out[N + K + k] * change[k];
        out[at] = 0.5 * (y_before + y) + (d_before - d) / 12.0;
        y_before = y;
        d_before = d;
    }
    return iterations;
}
