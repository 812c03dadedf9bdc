#include <stddef.h>
double survey(size_t n, size_t m, size_t w, double depth[n + m + w + 3], double *restrict echo) {
    double total = 0.0;
    for (size_t t = (n < 3 ? n : 3); t <= m - 1; t++) {
        double sum = 0.0;
        for (size_t i = (n < 3 ? n : 3); i < (w < 5 ? w : 5); i += 2) {
            for (size_t j = 0; j <= 4; j++) {
                for (size_t k = (m < 5 ? m : 5) - 1; k > 1; k -= 3) {
                    depth[k + 1] += total;
                }
            }
        }
        echo[t] = sum;
    }
    return total;
}
/* nest at line 4, plan: i:2 t:4 t:2 t i j */
