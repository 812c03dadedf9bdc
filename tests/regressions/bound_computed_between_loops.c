#include <stddef.h>
void survey(int n, int m, int w, double depth[n + 3][n + 3][6]) {
    int most;
    for (int i = 0; i < n; i++) {
        most = i < 3 ? i : 3;
        for (int j = 0; j < m; j++) {
            for (int k = 0; k < most; k++) {
                depth[i][j + k - k][k] += w;
            }
        }
    }
}
/* nest at line 4, plan: j:2 i j k */
