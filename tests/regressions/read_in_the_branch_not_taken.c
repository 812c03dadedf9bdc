void survey(int n, int m, int w, double *restrict depth) {
    for (int t = 0; t < m; t = t + 2) {
        for (int i = 2; i < n; i++) {
            for (int j = 2; j < n; ++j) {
                for (int k = m - 1; k >= 0; k--) {
                    depth[t - 1] += k > 1 ? depth[t - j] : 1;
                }
            }
        }
    }
}
/* nest at line 2, plan: i:3 t i j k */
