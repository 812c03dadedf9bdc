/*
 * beamform.c - form beams from the echoes of a hydrophone array.
 *
 * A beam is a weighted sum over the hydrophones, so a block of pings is a matrix product: steering weights
 * (beams x hydrophones) times echoes (hydrophones x samples).  The loops stand in the order in which the formula is
 * read, which walks the echoes down their columns.
 *
 * Part of an invented seabed-survey code; all data it is run on is invented too.
 */
#include <stddef.h>

/* One square block: as many beams as hydrophones, and as many samples. */
void form_beams(int n, double beams[n][n], double weights[n][n], double echoes[n][n]) {
    for (int i = 0; i < n; i++) {
        for (int j = 0; j < n; j++) {
            for (int k = 0; k < n; k++) {
                beams[i][j] += weights[i][k] * echoes[k][j];
            }
        }
    }
}

/* The same for a window of larger arrays: every row has its own distance to the next (ld = leading dimension). */
void form_beams_in_window(size_t n_beams, size_t n_samples, size_t n_phones,
                          double *restrict beams, size_t ld_beams,
                          const double *restrict weights, size_t ld_weights,
                          const double *restrict echoes, size_t ld_echoes) {
    for (size_t i = 0; i < n_beams; ++i) {
        for (size_t j = 0; j < n_samples; ++j) {
            for (size_t k = 0; k < n_phones; ++k) {
                beams[i * ld_beams + j] += weights[i * ld_weights + k] * echoes[k * ld_echoes + j];
            }
        }
    }
}

/* Start a block afresh, then add up; the sum is kept in a local until the beam is complete. */
void form_beams_afresh(int beams_count, int samples, int phones, float *beams, const float *weights,
                       const float *echoes) {
    for (int b = 0; b < beams_count; b++) {
        for (int s = 0; s < samples; s++) {
            float sum = 0.0f;
            for (int p = 0; p < phones; p++) {
                sum += weights[b * phones + p] * echoes[p * samples + s];
            }
            beams[b * samples + s] = sum;
        }
    }
}
