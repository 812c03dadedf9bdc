#include <stddef.h>
static double depth[24][24];
void survey(int n, int m, int w, double *echo) {
    for (unsigned short t = m - 1; t-- > 0;) {
        for (unsigned short i = 0; i < (n < 5 ? n : 5); i++) {
            for (unsigned short j = 1; j < m; j++) {
                for (unsigned short k = 0; k < 2 * j; k++) {
                    depth[i + k][i] += depth[k][t] > 0.0 ? echo[2] + depth[t + 1][i] : 1.0;
                }
            }
        }
    }
}
/* nest at line 5, plan: k j i */
