/* Probabilistic data association for 4 states and 2 measured numbers, written for these sizes only.

   What a careful programmer would write by hand: sizes are constants, S is inverted in closed form,
   only lower triangles are computed, weights need no logarithm, and the three covariance terms of the
   textbook are one product K W K'. The model is linear with dense matrices.

   Source of the equations: Bar-Shalom, Daum and Huang (2009), IEEE Control Systems 29(6), The
   probabilistic data association filter, with Poisson clutter of a stated density. */

#include <math.h>
#include <stdint.h>
#include <string.h>

enum { N = 4, M = 2 };
static const double TWO_PI = 6.283185307179586;

typedef struct {
    double transition[N][N];     /* F */
    double process_noise[N][N];  /* Q */
    double measurement[M][N];    /* H */
    double noise[M][M];          /* R */
    double detected;             /* PD */
    double gate_probability;     /* PG */
    double gate_limit;           /* squared distance */
    double clutter;              /* false detections per scan and unit of the measurement */
} Model;

static void predict(const Model *model, double mean[N], double covariance[N][N]) {
    double moved[N], work[N][N];
    for (int i = 0; i < N; i++) {
        moved[i] = 0.0;
        for (int k = 0; k < N; k++) moved[i] += model->transition[i][k] * mean[k];
    }
    memcpy(mean, moved, sizeof moved);
    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++) {
            double value = 0.0;
            for (int k = 0; k < N; k++) value += model->transition[i][k] * covariance[k][j];
            work[i][j] = value;
        }
    for (int i = 0; i < N; i++)
        for (int j = 0; j <= i; j++) {
            double value = model->process_noise[i][j];
            for (int k = 0; k < N; k++) value += work[i][k] * model->transition[j][k];
            covariance[i][j] = covariance[j][i] = value;
        }
}

static void update(const Model *model, const double (*detections)[M], int64_t count,
                   double mean[N], double covariance[N][N]) {
    double expected[M], cross[N][M], gain[N][M];
    for (int a = 0; a < M; a++) {
        expected[a] = 0.0;
        for (int k = 0; k < N; k++) expected[a] += model->measurement[a][k] * mean[k];
    }
    for (int i = 0; i < N; i++)
        for (int a = 0; a < M; a++) {
            double value = 0.0;
            for (int k = 0; k < N; k++) value += covariance[i][k] * model->measurement[a][k];
            cross[i][a] = value;
        }
    double s00 = model->noise[0][0], s10 = model->noise[1][0], s11 = model->noise[1][1];
    for (int k = 0; k < N; k++) {
        s00 += model->measurement[0][k] * cross[k][0];
        s10 += model->measurement[1][k] * cross[k][0];
        s11 += model->measurement[1][k] * cross[k][1];
    }
    const double determinant = s00 * s11 - s10 * s10;
    const double reciprocal = 1.0 / determinant;
    const double i00 = s11 * reciprocal, i10 = -s10 * reciprocal, i11 = s00 * reciprocal;
    for (int i = 0; i < N; i++) {
        gain[i][0] = cross[i][0] * i00 + cross[i][1] * i10;
        gain[i][1] = cross[i][0] * i10 + cross[i][1] * i11;
    }

    const double peak = model->detected / (model->clutter * TWO_PI * sqrt(determinant));
    const double missed = 1.0 - model->detected * model->gate_probability;
    double found = 0.0, n0 = 0.0, n1 = 0.0, v00 = 0.0, v10 = 0.0, v11 = 0.0;
    for (int64_t j = 0; j < count; j++) {
        const double d0 = detections[j][0] - expected[0], d1 = detections[j][1] - expected[1];
        const double distance = d0 * d0 * i00 + 2.0 * d0 * d1 * i10 + d1 * d1 * i11;
        if (distance < model->gate_limit) {
            const double weight = peak * exp(-0.5 * distance);
            found += weight;
            n0 += weight * d0;
            n1 += weight * d1;
            v00 += weight * d0 * d0;
            v10 += weight * d1 * d0;
            v11 += weight * d1 * d1;
        }
    }
    if (found == 0.0) return;

    const double scale = 1.0 / (missed + found);
    found *= scale, n0 *= scale, n1 *= scale, v00 *= scale, v10 *= scale, v11 *= scale;
    for (int i = 0; i < N; i++) mean[i] += gain[i][0] * n0 + gain[i][1] * n1;
    /* W: what detections take away, less what their disagreement gives back. */
    const double w00 = found * s00 - (v00 - n0 * n0);
    const double w10 = found * s10 - (v10 - n1 * n0);
    const double w11 = found * s11 - (v11 - n1 * n1);
    for (int i = 0; i < N; i++) {
        const double g0 = gain[i][0] * w00 + gain[i][1] * w10;
        const double g1 = gain[i][0] * w10 + gain[i][1] * w11;
        for (int j = 0; j <= i; j++) {
            covariance[i][j] -= g0 * gain[j][0] + g1 * gain[j][1];
            covariance[j][i] = covariance[i][j];
        }
    }
}

/* A whole batch of trials. Scan k of a trial is detections[offsets[k]] up to detections[offsets[k + 1]]
   in the trial's row of offsets; means and covariances receive every scan's estimate. */
void run_pda(const Model *model, const double prior_mean[N], const double prior_covariance[N][N],
             const double (*detections)[M], const int64_t *offsets, int64_t trials, int64_t scans,
             double (*means)[N], double (*covariances)[N][N]) {
    for (int64_t trial = 0; trial < trials; trial++, offsets += scans + 1) {
        double mean[N], covariance[N][N];
        memcpy(mean, prior_mean, sizeof mean);
        memcpy(covariance, prior_covariance, sizeof covariance);
        for (int64_t k = 0; k < scans; k++, means++, covariances++) {
            if (k > 0) predict(model, mean, covariance);
            update(model, detections + offsets[k], offsets[k + 1] - offsets[k], mean, covariance);
            memcpy(*means, mean, sizeof mean);
            memcpy(*covariances, covariance, sizeof covariance);
        }
    }
}
