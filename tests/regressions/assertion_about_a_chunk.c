void survey(int n, int m, int w, double *restrict depth) {
    for (int i = 0; i < n; i++) {
        for (int j = 0; j < m; j++) {
            depth[i * w + j] *= 2.0;
        }
    }
}
/* nest at line 2, plan: j:J_CHUNK i:I_CHUNK i j */
