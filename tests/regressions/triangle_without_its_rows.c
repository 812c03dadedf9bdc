#include <stddef.h>
void survey(int n, int m, int w, double *depth) {
    for (int t = 0; t < n; t++) {
        for (int i = t; i < n; i++) {
            depth[(i + 1) * w + t - i] = depth[i * w + t - i];
        }
    }
}
/* nest at line 3, plan: t:64 i:2 t i */
