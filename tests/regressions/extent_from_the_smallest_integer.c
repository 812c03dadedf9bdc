#include <stddef.h>
void survey(int n, int m, int w, double *depth, double *echo) {
    for (unsigned short t = 0; t < w; t++) {
        for (unsigned short i = 0; i < t + 1; i++) {
            echo[((t + 1) / 2) * w + t] = depth[t - 1] > 0.0 ? echo[(t + 1 + n) * w + t - 1] : 1.0;
        }
    }
}
/* nest at line 3, plan: i:3 t:3 t i */
