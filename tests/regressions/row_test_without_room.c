#include <stddef.h>
void survey(int n, int m, int w, double *depth, double *restrict echo) {
    for (int t = 2; t < m; t++) {
        echo[t] += 0.5 * (t);
        for (int i = 0; i < w; i += 3) {
            for (int j = t; j < n; j++) {
                depth[(2 * t - i) * w + i - j] = depth[0 * w + j + t + n] - depth[j * w + i];
            }
        }
    }
}
/* nest at line 5, plan: j:2 j i */
