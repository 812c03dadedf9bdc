#include <stddef.h>
void survey(int n, int m, int w, double depth[n], double *restrict echo) {
    double level;
    level = 1.0;
    for (int t = m / 2 + 1 - 1; t > 0; t -= 2) {
        for (int i = n - 1 - 1; i >= 0; i -= 3) {
            double sum = 0.0;
            for (int j = m - i - 1; j >= 0; j -= 3) {
                echo[(j + i + n) * w + j - 1] *= echo[t * w + 2 * j] * depth[j];
            }
            echo[(i + 1) * w + t - 1] = sum;
        }
    }
}
/* nest at line 5, plan: t:3 t i j:4 j:2 j */
