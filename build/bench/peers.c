// The peers of the benchmark: the same jobs in plain C, one thread, single precision where Torrloom uses it. Written for
// comparison only; nothing of it is in the program.
//
//   peers FILE JOB REPEATS   prints the median seconds of JOB: backproject, gridding, fit or chain
//
// Build: gcc -O3 -march=native -ffast-math -DDELAYS=10 peers.c -o peers -lfftw3f -lm
#include <complex.h>
#include <fftw3.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#ifndef DELAYS
#define DELAYS 10
#endif
#define LANES ((DELAYS + 1) / 2)

typedef float complex cf;

static int spokes, samples, matrix;
static double fov, dk, zero, kcut;
static float *dir, *weight;
static double *delay;
static cf *signal; // [delay][spoke][sample]

static void die(const char *what) { fprintf(stderr, "%s\n", what); exit(1); }

static void load(const char *path) {
    FILE *f = fopen(path, "rb");
    int head[4];
    double more[4];
    if (!f || fread(head, 4, 4, f) != 4 || fread(more, 8, 4, f) != 4) die("no header");
    spokes = head[0], samples = head[1], matrix = head[3];
    if (head[2] != DELAYS) die("built for another number of delays");
    fov = more[0], dk = more[1], zero = more[2], kcut = more[3];
    dir = malloc(12L * spokes), weight = malloc(4L * spokes), delay = malloc(8L * DELAYS);
    signal = malloc(8L * DELAYS * spokes * samples);
    if (fread(dir, 12, spokes, f) != (size_t)spokes || fread(weight, 4, spokes, f) != (size_t)spokes ||
        fread(delay, 8, DELAYS, f) != DELAYS ||
        fread(signal, 8, (size_t)DELAYS * spokes * samples, f) != (size_t)DELAYS * spokes * samples) die("short file");
    fclose(f);
}

static double now(void) { struct timespec t; clock_gettime(CLOCK_MONOTONIC, &t); return t.tv_sec + 1e-9 * t.tv_nsec; }

// Decimated spokes: [spoke][m = 0..half][delay], k = m·step, the Hermitian part of the trace. Each trace goes to position by
// FFT, is cut to the band, and comes back on a coarser grid of k.
static int half;
static double step;
static cf *kspace;

static void decimate(void) {
    int length = 1;
    while (length < samples) length *= 2;
    double period = 1 / dk, band = 2 * 1.15 * fov;
    int bins = 2 * (int)ceil(band * length * dk / 2);
    if (bins > length) bins = length;
    double width = bins / (length * dk); // of the kept positions
    step = 1 / width, half = (int)(kcut / step);
    kspace = realloc(kspace, 8L * spokes * (half + 1) * DELAYS);
    cf *a = fftwf_malloc(8L * length), *b = fftwf_malloc(8L * bins);
    fftwf_plan there = fftwf_plan_dft_1d(length, a, a, FFTW_BACKWARD, FFTW_MEASURE), back = fftwf_plan_dft_1d(bins, b, b, FFTW_FORWARD, FFTW_MEASURE);
    (void)period;
    for (int d = 0; d < DELAYS; d++)
        for (int s = 0; s < spokes; s++) {
            memcpy(a, signal + ((long)d * spokes + s) * samples, 8L * samples);
            memset(a + samples, 0, 8L * (length - samples));
            fftwf_execute(there);
            for (int i = -bins / 2; i < bins / 2; i++) {
                double x = i / (length * dk);
                cf p = a[(i + length) % length] * cexpf(-2 * M_PI * I * (float)(zero * dk * x)) * (float)dk;
                b[(i + bins) % bins] = crealf(p); // the real part of the projection
            }
            fftwf_execute(back);
            for (int m = 0; m <= half; m++) kspace[((long)s * (half + 1) + m) * DELAYS + d] = b[m] * (float)(width / bins);
        }
    fftwf_destroy_plan(there), fftwf_destroy_plan(back), fftwf_free(a), fftwf_free(b);
}

static float hann(int m) { double u = m * step / kcut; return u > 1 ? 0 : 0.5 + 0.5 * cos(M_PI * u); }

static float *image; // [voxel][delay]

static void backproject(void) {
    int length = 1;
    while (length < 8 * 2 * half) length *= 2;
    double period = 1 / step, dx = period / length, size = fov / matrix;
    int reach = (int)ceil(fov / 2 / dx) + 2, rows = 2 * reach + 1;
    float *table = malloc(4L * rows * DELAYS);
    cf *line = fftwf_malloc(8L * length);
    fftwf_plan plan = fftwf_plan_dft_1d(length, line, line, FFTW_BACKWARD, FFTW_MEASURE);
    memset(image, 0, 4L * matrix * matrix * matrix * DELAYS);
    for (int s = 0; s < spokes; s++) {
        for (int l = 0; l < LANES; l++) {
            memset(line, 0, 8L * length);
            for (int m = 0; m <= half; m++) {
                double k = m * step;
                float w = weight[s] * k * k * step * hann(m);
                cf *row = kspace + ((long)s * (half + 1) + m) * DELAYS;
                cf p = row[2 * l] * w, q = 2 * l + 1 < DELAYS ? row[2 * l + 1] * w : 0;
                line[m] = p + I * q, line[(length - m) % length] = conjf(p) + I * conjf(q);
            }
            fftwf_execute(plan);
            for (int x = -reach; x <= reach; x++) {
                cf v = line[(x + length) % length];
                table[(x + reach) * DELAYS + 2 * l] = crealf(v);
                if (2 * l + 1 < DELAYS) table[(x + reach) * DELAYS + 2 * l + 1] = cimagf(v);
            }
        }
        for (int z = 0; z < matrix; z++)
            for (int y = 0; y < matrix; y++) {
                double Y = (y - matrix / 2) * size, Z = (z - matrix / 2) * size, r2 = fov * fov / 4 - Y * Y - Z * Z;
                if (r2 < 0) continue;
                int far = (int)(sqrt(r2) / size), first = matrix / 2 - far, end = matrix / 2 + far + 1;
                if (end > matrix) end = matrix;
                if (first < 0) first = 0;
                float at = (dir[3 * s] * (first - matrix / 2) * size + dir[3 * s + 1] * Y + dir[3 * s + 2] * Z) / dx + reach, by = dir[3 * s] * size / dx;
                float *out = image + ((long)(z * matrix + y) * matrix + first) * DELAYS;
                for (int x = first; x < end; x++, at += by, out += DELAYS) {
                    int i = (int)at;
                    float f = at - i;
                    const float *t = table + (long)i * DELAYS;
                    for (int d = 0; d < DELAYS; d++) out[d] += t[d] + f * (t[d + DELAYS] - t[d]);
                }
            }
    }
    fftwf_destroy_plan(plan), fftwf_free(line), free(table);
}

static double bessel0(double x) { double sum = 1, term = 1; for (int k = 1; k < 60; k++) term *= x * x / (4.0 * k * k), sum += term; return sum; }

static void gridding(void) {
    const int width = 4, n = (int)(1.5 * matrix + 0.5), fine = 4096;
    const double beta = M_PI * sqrt(pow(width / 1.5 * (1.5 - 0.5), 2) - 0.8); // Beatty, Nishimura & Pauly 2005, eq. 5
    float *kernel = malloc(4L * (fine + 2));
    for (int i = 0; i <= fine; i++) { double u = (double)i / fine; kernel[i] = bessel0(beta * sqrt(1 - u * u)) / bessel0(beta); }
    kernel[fine + 1] = 0;
    long cells = (long)n * n * n;
    cf *grid = fftwf_malloc(8L * cells * LANES);
    int dims[3] = {n, n, n};
    fftwf_plan plan = fftwf_plan_many_dft(3, dims, LANES, grid, NULL, LANES, 1, grid, NULL, LANES, 1, FFTW_BACKWARD, FFTW_ESTIMATE);
    memset(grid, 0, 8L * cells * LANES);
    for (int s = 0; s < spokes; s++)
        for (int m = 0; m <= half; m++) {
            double k = m * step;
            float w = weight[s] * k * k * step * hann(m);
            cf *row = kspace + ((long)s * (half + 1) + m) * DELAYS;
            for (int sign = 1; sign >= (m ? -1 : 1); sign -= 2) {
                cf v[LANES];
                for (int l = 0; l < LANES; l++) {
                    cf p = row[2 * l] * w, q = 2 * l + 1 < DELAYS ? row[2 * l + 1] * w : 0;
                    if (sign < 0) p = conjf(p), q = conjf(q);
                    v[l] = p + I * q;
                }
                int from[3];
                float weights[3][8];
                for (int a = 0; a < 3; a++) {
                    double at = sign * k * dir[3 * s + a] * fov * n / matrix; // in cells
                    from[a] = (int)ceil(at - width / 2.0);
                    for (int i = 0; i < width; i++) {
                        double u = fabs(from[a] + i - at) / (width / 2.0);
                        weights[a][i] = u > 1 ? 0 : kernel[(int)(u * fine + 0.5)];
                    }
                }
                for (int c = 0; c < width; c++)
                    for (int b = 0; b < width; b++) {
                        float zy = weights[2][c] * weights[1][b];
                        long base = ((long)((from[2] + c + n) % n) * n + (from[1] + b + n) % n) * n;
                        for (int a = 0; a < width; a++) {
                            cf *cell = grid + (base + (from[0] + a + n) % n) * LANES;
                            float w3 = zy * weights[0][a];
                            for (int l = 0; l < LANES; l++) cell[l] += v[l] * w3;
                        }
                    }
            }
        }
    fftwf_execute(plan);
    float *apod = malloc(4L * matrix);
    for (int i = 0; i < matrix; i++) {
        double x = M_PI * width * (double)(i - matrix / 2) / n, q = beta * beta - x * x;
        apod[i] = 1 / (q > 0 ? sinh(sqrt(q)) / sqrt(q) : sin(sqrt(-q)) / sqrt(-q));
    }
    for (int z = 0; z < matrix; z++)
        for (int y = 0; y < matrix; y++)
            for (int x = 0; x < matrix; x++) {
                cf *cell = grid + (((long)((z - matrix / 2 + n) % n) * n + (y - matrix / 2 + n) % n) * n + (x - matrix / 2 + n) % n) * LANES;
                float w = apod[x] * apod[y] * apod[z], *out = image + ((long)(z * matrix + y) * matrix + x) * DELAYS;
                for (int d = 0; d < DELAYS; d++) out[d] = w * (d % 2 ? cimagf(cell[d / 2]) : crealf(cell[d / 2]));
            }
    fftwf_destroy_plan(plan), fftwf_free(grid), free(apod), free(kernel);
}

// Variable projection of S = A - B exp(-R T): best of 64 rates, then Newton on the projected sum of squares.
static double fit(void) {
    enum { nodes = 64 };
    static double unit[nodes][DELAYS], rates[nodes];
    for (int n = 0; n < nodes; n++) {
        rates[n] = exp(log(0.02) + (log(8.0) - log(0.02)) * n / (nodes - 1));
        double mean = 0, norm = 0;
        for (int d = 0; d < DELAYS; d++) mean += (unit[n][d] = -exp(-rates[n] * delay[d])) / DELAYS;
        for (int d = 0; d < DELAYS; d++) unit[n][d] -= mean, norm += unit[n][d] * unit[n][d];
        for (int d = 0; d < DELAYS; d++) unit[n][d] /= sqrt(norm);
    }
    double sum = 0, r2 = matrix * matrix / 4.0;
    for (int i = 0; i < matrix * matrix * matrix; i++) {
        int x = i % matrix - matrix / 2, y = i / matrix % matrix - matrix / 2, z = i / matrix / matrix - matrix / 2;
        if (x * x + y * y + z * z > r2) continue;
        double v[DELAYS], mean = 0, best = -1, lnR = 0;
        for (int d = 0; d < DELAYS; d++) mean += (v[d] = image[(long)i * DELAYS + d]) / DELAYS;
        for (int d = 0; d < DELAYS; d++) v[d] -= mean;
        for (int n = 0; n < nodes; n++) {
            double p = 0;
            for (int d = 0; d < DELAYS; d++) p += unit[n][d] * v[d];
            if (p > best) best = p, lnR = log(rates[n]);
        }
        for (int it = 0; it < 5; it++) {
            double R = exp(lnR), c[DELAYS], f[DELAYS], s[DELAYS], mc = 0, mf = 0, ms = 0;
            for (int d = 0; d < DELAYS; d++) {
                double e = exp(-R * delay[d]), t = R * delay[d];
                c[d] = -e, f[d] = t * e, s[d] = t * e - t * t * e;
                mc += c[d] / DELAYS, mf += f[d] / DELAYS, ms += s[d] / DELAYS;
            }
            double yc = 0, yf = 0, ys = 0, cc = 0, cfp = 0, ff = 0, cs = 0;
            for (int d = 0; d < DELAYS; d++) {
                double a = c[d] - mc, b = f[d] - mf, g = s[d] - ms;
                yc += v[d] * a, yf += v[d] * b, ys += v[d] * g, cc += a * a, cfp += a * b, ff += b * b, cs += a * g;
            }
            double g = yf * cc - yc * cfp, h = ys * cc + 2 * yf * cfp - yf * cfp - yc * (ff + cs);
            double move = h < 0 ? -g / h : 0;
            if (fabs(move) > 0.5) move = move > 0 ? 0.5 : -0.5;
            lnR += move;
            if (fabs(move) < 1e-8) break;
        }
        sum += exp(lnR);
    }
    return sum;
}

static int ascending(const void *a, const void *b) { double d = *(double *)a - *(double *)b; return (d > 0) - (d < 0); }

int main(int count, char **args) {
    if (count != 4) die("peers FILE JOB REPEATS");
    load(args[1]);
    image = malloc(4L * matrix * matrix * matrix * DELAYS);
    int repeats = atoi(args[3]);
    double times[99], sink = 0;
    if (!strcmp(args[2], "fit")) decimate(), gridding();
    for (int i = 0; i < repeats; i++) {
        double start = now();
        if (strcmp(args[2], "fit")) decimate();
        if (!strcmp(args[2], "backproject")) backproject();
        if (!strcmp(args[2], "gridding")) gridding();
        if (!strcmp(args[2], "fit")) sink += fit();
        if (!strcmp(args[2], "chain")) backproject(), sink += fit();
        times[i] = now() - start;
    }
    qsort(times, repeats, 8, ascending);
    fprintf(stderr, "%g %g\n", sink, image[((long)(matrix / 2 * matrix + matrix / 2) * matrix + matrix / 2) * DELAYS + DELAYS - 1]);
    printf("%.6f\n", times[repeats / 2]);
    return 0;
}
