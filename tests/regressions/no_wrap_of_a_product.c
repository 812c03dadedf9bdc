#include <stddef.h>
struct sounding { double low; double high; };
void survey(unsigned n, unsigned m, unsigned w, double *restrict depth, double echo[n + m + w + 3][n + m + w + 3][n + m + w + 3], struct sounding *swath) {
    for (unsigned t = (n < 3 ? n : 3); t <= w / 2 + 1; t++) {
        echo[t][t][t] = depth[t * w + 2 * t] * depth[t * w + t];
    }
}
/* nest at line 4, plan: t:1 t */
