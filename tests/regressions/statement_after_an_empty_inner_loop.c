#include <stddef.h>
static float depth[24][24];
void survey(int n, int m, int w, float *restrict echo) {
    for (int t = 0; t < 4; t++) {
        for (int i = 0; i < (w < 5 ? w : 5); i++) {
            for (int j = 0; j < m; j++) {
                depth[j + 2][t] += echo[j];
            }
            depth[i + 2][t + 2] += echo[i] - depth[i][t + i];
        }
    }
}
/* nest at line 4, plan: j:1 j t i */
