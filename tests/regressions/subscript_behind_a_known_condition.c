void survey(int n, int m, int w, double *restrict depth, double echo[n + 3][m + 3]) {
    for (int t = 0; t < w - 1; t = t + 2) {
        for (long i = (n < 3 ? n : 3); i <= (m < 5 ? m : 5); i += 1) {
            if (t > 0 && echo[t + i][t] > 0) {
                depth[i] += depth[i - 1] + t;
            } else {
                depth[2 * i] = echo[i % 2][i];
            }
        }
    }
}
/* nest at line 2, plan: i t:64 t */
