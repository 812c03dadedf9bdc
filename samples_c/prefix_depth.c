/* prefix_depth.c: running sums over a depth grid, so that the mean of any rectangle costs four look-ups.
   Depths in whole centimetres.  Invented. */
#include <stdint.h>

typedef int64_t total_t;

void sums_along_rows(int32_t rows, int32_t cols, total_t sums[rows][cols], int32_t depth[rows][cols]) {
  for (int32_t r = 0; r < rows; ++r) {
    sums[r][0] = depth[r][0];
    for (int32_t c = 1; c < cols; ++c) { sums[r][c] = sums[r][c - 1] + depth[r][c]; }
  }
}

void sums_down_columns(int32_t rows, int32_t cols, total_t sums[rows][cols]) {
  for (int32_t c = 0; c < cols; ++c)
    for (int32_t r = 1; r < rows; ++r)
      sums[r][c] += sums[r - 1][c];
}

/* Both at once, every second cell only: a coarse table for the overview map. */
void coarse_sums(int32_t rows, int32_t cols, total_t *restrict sums, const int32_t *restrict depth) {
  for (int32_t r = 2; r < rows; r += 2)
    for (int32_t c = 2; c < cols; c += 2)
      sums[r * cols + c] = sums[(r - 2) * cols + c] + sums[r * cols + c - 2] - sums[(r - 2) * cols + c - 2]
                         + depth[r * cols + c];
}
