#include <stddef.h>
void survey(int m, int w, float *restrict echo, double *swath) {
    for (size_t t = (m < 5 ? m : 5); t-- > 0;) {
        for (size_t i = 0; i < m - 1 && i < m; i++) {
            for (size_t j = 0; j < i; j += 1) {
                echo[2 * t + 2] += swath[t + i];
            }
        }
    }
}
/* nest at line 3, plan: i t j; remainder peel */
