void survey(int n, int m, int w, double depth[n + 3][n + 3]) {
    for (int i = 0; i < n; i++) {
        int most = n - i;
        for (int j = 0; j < most; j++) {
            depth[i][j] += m;
        }
    }
}
/* nest at line 2, plan: i:4 j:2 i j */
