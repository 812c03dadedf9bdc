#include <stddef.h>
double survey(int n, int m, int w, int depth[n][m][w]) {
    double total = 0.0;
    for (short t = 0; t < m - 1; t++) {
        for (short i = 0; i < 4; i += 2) {
            for (short j = t; j < t + 3; j++) {
                depth[i + 1][t][i] = depth[j][i][t] * depth[i][j + j][j + 2];
            }
        }
    }
    return total;
}
/* nest at line 4, plan: j:3 j t i:1 i */
