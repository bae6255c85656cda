/* Discharge of Legendre-order panels at many points, written for comparison with the package's own kernel.

   panel rows: x1, y1, x2, y2, middle x, y, half vector x, y, length (m). moment rows: far moments times L/(2 pi), so
   that W = Qx - i Qy = -(1/(z - c)) sum_k m_k t^k, t = h/(z - c). coef rows: strengths of P_0 .. P_(n-1) on plain
   panels (m2/d). Points are taken in blocks of 64 in local buffers with panels outside, so that the loop over points
   vectorises. */

#include <math.h>

enum { BLOCK = 64, STRIDE = 9 };

/* the least that any summation can do: 8 terms everywhere, whatever the distance */
void far_only(long n, const double *x, const double *y, long p_count, const double *panel, const double *moment,
              long m_stride, double *qx, double *qy) {
    for (long start = 0; start < n; start += BLOCK) {
        int size = n - start < BLOCK ? (int)(n - start) : BLOCK;
        double px[BLOCK], py[BLOCK], ax[BLOCK] = {0}, ay[BLOCK] = {0};
        for (int i = 0; i < BLOCK; i++) {
            px[i] = x[start + (i < size ? i : 0)];
            py[i] = y[start + (i < size ? i : 0)];
        }
        for (long p = 0; p < p_count; p++) {
            const double *g = panel + STRIDE * p, *m = moment + m_stride * p;
            const double cx = g[4], cy = g[5], hx = g[6], hy = g[7];
            const double m0 = m[0], m1 = m[1], m2 = m[2], m3 = m[3], m4 = m[4], m5 = m[5], m6 = m[6], m7 = m[7];
            for (int i = 0; i < BLOCK; i++) {
                double dx = px[i] - cx, dy = py[i] - cy, inv = 1.0 / (dx * dx + dy * dy);
                double tr = (hx * dx + hy * dy) * inv, ti = (hy * dx - hx * dy) * inv;
                double s = 2.0 * tr, r = tr * tr + ti * ti; /* Goertzel's scheme for real coefficients */
                double b7 = m7, b6 = m6 + s * b7, b5 = m5 + s * b6 - r * b7, b4 = m4 + s * b5 - r * b6;
                double b3 = m3 + s * b4 - r * b5, b2 = m2 + s * b3 - r * b4, b1 = m1 + s * b2 - r * b3;
                double sr = m0 + tr * b1 - r * b2, si = ti * b1;
                ax[i] -= (sr * dx + si * dy) * inv;
                ay[i] -= (sr * dy - si * dx) * inv;
            }
        }
        for (int i = 0; i < size; i++) {
            qx[start + i] = ax[i];
            qy[start + i] = ay[i];
        }
    }
}

/* number of terms by squared distance in half lengths: the package's own tiers (1e-14 of the leading term) */
static int terms(double z2, int last) {
    if (z2 > 1e4) return z2 < 1e6 ? 8 : 6;
    if (z2 > 400.0) return 12;
    if (z2 > 100.0) return 16;
    if (z2 > 36.0) return 20;
    if (z2 > 16.0) return 26;
    if (z2 > 9.0) return 34;
    if (z2 > 5.0) return 46;
    return last;
}

/* the same for about nine digits, the tiers of a summation that asks no more */
static int terms9(double z2, int last) {
    if (z2 > 1e4) return 4;
    if (z2 > 400.0) return 8;
    if (z2 > 100.0) return 10;
    if (z2 > 36.0) return 12;
    if (z2 > 16.0) return 16;
    if (z2 > 9.0) return 20;
    if (z2 > 5.0) return 26;
    return last < 46 ? last : 46;
}

/* closed form near a plain panel: W = -(sum a_n Q_n(Z)) / (pi 2 h) L, by forward recurrence (DLMF 14.10.3) */
static void near_panel(double x, double y, const double *g, const double *a, int n_coef, double *wr, double *wi) {
    double ux = x - g[0], uy = y - g[1], vx = x - g[2], vy = y - g[3], hx = g[6], hy = g[7];
    double h2 = hx * hx + hy * hy, u2 = ux * ux + uy * uy, v2 = vx * vx + vy * vy;
    double zr = 0.5 * (hx * (ux + vx) + hy * (uy + vy)) / h2, zi = 0.5 * (hx * (uy + vy) - hy * (ux + vx)) / h2;
    double ar = 0.25 * log(u2 / v2), ai = 0.5 * atan2(ux * vy * -1.0 + uy * vx, ux * vx + uy * vy);
    /* arg((z - z1)/(z - z2)) = arg((z - z1) conj(z - z2)) */
    double br = zr * ar - zi * ai - 1.0, bi = zr * ai + zi * ar;
    double sr = a[0] * ar, si = a[0] * ai;
    for (int n = 1; n < n_coef; n++) {
        sr += a[n] * br;
        si += a[n] * bi;
        double f = (2.0 * n + 1.0) / (n + 1.0), e = n / (n + 1.0);
        double cr = f * (zr * br - zi * bi) - e * ar, ci = f * (zr * bi + zi * br) - e * ai;
        ar = br;
        ai = bi;
        br = cr;
        bi = ci;
    }
    double c = -g[8] / (2.0 * M_PI) / h2; /* sum_n a_n 2 Q_n times -L/(2 pi (z2 - z1)), z2 - z1 = 2 h */
    *wr = c * (sr * hx + si * hy);
    *wi = c * (si * hx - sr * hy);
}

/* closed form within 1.6 half lengths, else a series whose length is that of the nearest point of the block */
void tiered(long n, const double *x, const double *y, long p_count, const double *panel, const double *moment,
            long m_stride, const double *coef, long c_stride, int n_coef, int digits9, double *qx, double *qy) {
    for (long start = 0; start < n; start += BLOCK) {
        int size = n - start < BLOCK ? (int)(n - start) : BLOCK;
        double px[BLOCK], py[BLOCK], ax[BLOCK] = {0}, ay[BLOCK] = {0};
        for (int i = 0; i < BLOCK; i++) {
            px[i] = x[start + (i < size ? i : 0)];
            py[i] = y[start + (i < size ? i : 0)];
        }
        for (long p = 0; p < p_count; p++) {
            const double *g = panel + STRIDE * p, *m = moment + m_stride * p;
            const double cx = g[4], cy = g[5], hx = g[6], hy = g[7], h2 = hx * hx + hy * hy, limit = 2.56 * h2;
            double d2[BLOCK], far = 1e300;
            int near = 0;
            for (int i = 0; i < BLOCK; i++) {
                double dx = px[i] - cx, dy = py[i] - cy;
                d2[i] = dx * dx + dy * dy;
                int close = d2[i] <= limit;
                near += close;
                double d = close ? 1e300 : d2[i];
                far = d < far ? d : far;
            }
            if (near < BLOCK) {
                int k_max = digits9 ? terms9(far / h2, (int)m_stride) : terms(far / h2, (int)m_stride);
                double b1[BLOCK], b2[BLOCK], tr[BLOCK], s[BLOCK], r[BLOCK], inv[BLOCK];
                for (int i = 0; i < BLOCK; i++) {
                    double dx = px[i] - cx, dy = py[i] - cy;
                    inv[i] = d2[i] > limit ? 1.0 / d2[i] : 0.0; /* near points: adds nothing here */
                    tr[i] = (hx * dx + hy * dy) * inv[i];
                    s[i] = 2.0 * tr[i];
                    r[i] = h2 * inv[i];
                    b1[i] = 0.0;
                    b2[i] = 0.0;
                }
                for (int k = k_max - 1; k > 0; k--) {
                    const double c = m[k];
                    for (int i = 0; i < BLOCK; i++) {
                        double b0 = c - r[i] * b2[i] + s[i] * b1[i];
                        b2[i] = b1[i];
                        b1[i] = b0;
                    }
                }
                for (int i = 0; i < BLOCK; i++) {
                    double dx = px[i] - cx, dy = py[i] - cy, ti = (hy * dx - hx * dy) * inv[i];
                    double sr = m[0] + tr[i] * b1[i] - r[i] * b2[i], si = ti * b1[i];
                    ax[i] -= (sr * dx + si * dy) * inv[i];
                    ay[i] -= (sr * dy - si * dx) * inv[i];
                }
            }
            if (near > 0)
                for (int i = 0; i < size; i++)
                    if (d2[i] <= limit) {
                        double wr, wi;
                        near_panel(px[i], py[i], g, coef + c_stride * p, n_coef, &wr, &wi);
                        ax[i] += wr;
                        ay[i] -= wi;
                    }
        }
        for (int i = 0; i < size; i++) {
            qx[start + i] = ax[i];
            qy[start + i] = ay[i];
        }
    }
}
