/* Heated tanks in series under a scanned controller, by the method of the engine, written for this plant alone:
   Dormand and Prince 5(4), steps that end at scans, the step size remembered across them. N tanks; states are the tanks,
   the element, the thermometer. Prints seconds of one run (the best of several), steps, rejections and the last state. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#define NX (N + 2)
static const double rho = 998.0, cp = 4182.0, UA_t = 40.0, T_amb = 293.15, power = 250e3, C = 60e3, UA = 6e3, lag = 20.0;
static const double low = 273.15, high = 373.15, Kc = 2.0, Ti = 900.0, Ts = 0.5, sp = 318.15;
static double qin, warm[N], less[N], out, I, last_scan, x0[NX];

static inline void rates(const double *restrict x, double *restrict dx) {
    double heat = UA * (x[N] - x[0]);
    dx[0] = (((warm[0] * ((12.0 + 273.15) - x[0])) + heat) - (UA_t * (x[0] - T_amb))) * less[0];
    for (int i = 1; i < N; i++) dx[i] = (((warm[i] * (x[i - 1] - x[i])) + 0.0) - (UA_t * (x[i] - T_amb))) * less[i];
    double duty = out > 1.0 ? 1.0 : out;
    duty = duty < 0.0 ? 0.0 : duty;
    dx[N] = ((power * duty) - heat) * (1.0 / C);
    dx[N + 1] = (x[N - 1] - x[N + 1]) * (1.0 / lag);
}

static void flow(double q) {
    qin = q;
    for (int i = 0; i < N; i++) {
        warm[i] = (rho * cp) * q;
        less[i] = 1.0 / ((rho * cp) * ((20.0 + (i + 1)) / 64.0));
    }
}

static void scan(double t, const double *x) {
    double raw = x[N + 1], y = raw > high ? high : raw;
    y = y < low ? low : y;
    y = (y - low) / (high - low);
    double dt = last_scan >= 0.0 ? t - last_scan : Ts;
    last_scan = t;
    double r = (sp - low) / (high - low), P = Kc * (r - y), e = r - y, push = ((Kc * dt) / Ti) * e;
    double bottom = 0.0 - P, top = 1.0 - P;
    if (push > 0.0) {
        double next = I + push;
        next = top < next ? top : next;
        I = next > I ? next : I;
    } else {
        double next = I + push;
        next = bottom > next ? bottom : next;
        I = next < I ? next : I;
    }
    double asked = P + I;
    out = asked > 1.0 ? 1.0 : asked;
    out = out < 0.0 ? 0.0 : out;
}

static long steps, rejected;

static void advance(double *t, double until, double *x, double *proposed, double *k1, int *stale) {
    static double k2[NX], k3[NX], k4[NX], k5[NX], k6[NX], k7[NX], y[NX], new[NX];
    while (*t < until - 1e-10 * (1.0 + until)) {
        double h = *proposed;
        int cut = 0;
        if (*t + h * 1.000001 >= until) { h = until - *t; cut = 1; }
        if (*stale) rates(x, k1);
        for (int i = 0; i < NX; i++) y[i] = x[i] + h * (0.2 * k1[i]);
        rates(y, k2);
        for (int i = 0; i < NX; i++) y[i] = x[i] + h * (0.075 * k1[i] + 0.225 * k2[i]);
        rates(y, k3);
        for (int i = 0; i < NX; i++) y[i] = x[i] + h * ((44.0 / 45) * k1[i] + (-56.0 / 15) * k2[i] + (32.0 / 9) * k3[i]);
        rates(y, k4);
        for (int i = 0; i < NX; i++)
            y[i] = x[i] + h * ((19372.0 / 6561) * k1[i] + (-25360.0 / 2187) * k2[i] + (64448.0 / 6561) * k3[i] + (-212.0 / 729) * k4[i]);
        rates(y, k5);
        for (int i = 0; i < NX; i++)
            y[i] = x[i] + h * ((9017.0 / 3168) * k1[i] + (-355.0 / 33) * k2[i] + (46732.0 / 5247) * k3[i] + (49.0 / 176) * k4[i] + (-5103.0 / 18656) * k5[i]);
        rates(y, k6);
        for (int i = 0; i < NX; i++)
            new[i] = x[i] + h * ((35.0 / 384) * k1[i] + (500.0 / 1113) * k3[i] + (125.0 / 192) * k4[i] + (-2187.0 / 6784) * k5[i] + (11.0 / 84) * k6[i]);
        rates(new, k7);
        double worst = 0.0;
        for (int i = 0; i < NX; i++) {
            double moved = fabs(new[i] - x0[i]), scale = moved < 1.0 ? 1.0 : moved;
            double error = fabs(h * ((71.0 / 57600) * k1[i] + (-71.0 / 16695) * k3[i] + (71.0 / 1920) * k4[i] + (-17253.0 / 339200) * k5[i] + (22.0 / 525) * k6[i] + (-1.0 / 40) * k7[i])) / (1e-8 * scale);
            worst = error > worst ? error : worst;
        }
        if (!(worst <= 1.0)) {
            double shrink = 0.9 * pow(worst, -0.2);
            *proposed = h * (shrink > 0.2 ? shrink : 0.2);
            *stale = 0;
            rejected++;
            continue;
        }
        double grow = worst > 1e-4 ? 0.9 * pow(worst, -0.2) : 5.0, next = h * grow;
        if (cut && next < *proposed && grow >= 1.0) next = *proposed;
        *proposed = next;
        *t = cut ? until : *t + h;
        memcpy(x, new, sizeof new);
        memcpy(k1, k7, sizeof k7);
        *stale = 0;
        steps++;
    }
}

static double run(double hours, const double *start, double *x) {
    struct timespec a, b;
    clock_gettime(CLOCK_MONOTONIC, &a);
    static double k1[NX];
    memcpy(x, start, NX * sizeof(double));
    memcpy(x0, start, NX * sizeof(double));
    flow(3.0 / 3600.0);
    steps = rejected = 0;
    out = start[NX];
    I = start[NX + 1];
    last_scan = -1.0;
    double t = 0.0, end = hours * 3600.0, proposed = 1.0, change = 600.0;
    int stale = 1;
    scan(0.0, x);
    for (long k = 1; t < end - 1e-9 * end; k++) {
        double at = k * Ts;
        if (t == change) flow((3.0 / 3600.0) * 1.2);
        advance(&t, at < end ? at : end, x, &proposed, k1, &stale);
        if (at <= end + 1e-9) scan(at, x);
        stale = 1;
    }
    clock_gettime(CLOCK_MONOTONIC, &b);
    return (b.tv_sec - a.tv_sec) + 1e-9 * (b.tv_nsec - a.tv_nsec);
}

int main(int count, char **words) {
    double hours = atof(words[1]), start[NX + 2], x[NX], best = 1e9;
    int repeats = atoi(words[2]);
    for (int i = 0; i < NX + 2; i++) start[i] = atof(words[3 + i]);
    for (int k = 0; k < repeats; k++) {
        double took = run(hours, start, x);
        best = took < best ? took : best;
    }
    printf("%.9f %ld %ld", best, steps, rejected);
    for (int i = 0; i < NX; i++) printf(" %a", x[i]);
    printf("\n");
    return 0;
}
