#include <stddef.h>
static double echo[24][24];
static double swath[24][24];
void survey(unsigned char n, unsigned char m, unsigned char w, double *depth) {
    for (unsigned char t = 0; t <= n - 1; t++) {
        if (t == 1 || n > 2) {
            depth[t] = depth[t - 2] + swath[t][t];
        } else {
            swath[t][t] -= 0.5 * (echo[t + 1][t + 1]);
        }
        for (unsigned char i = (n < 3 ? n : 3); i < m; i++) {
            swath[i + i][i + 2] = depth[i];
        }
    }
}
/* nest at line 5, plan: i:5 t:64 i:2 t i */
