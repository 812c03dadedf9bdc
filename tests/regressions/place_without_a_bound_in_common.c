void survey(int n, int m, int w, double *restrict depth, double echo[n + 3][m + 3]) {
    for (int t = 0; t < w - 1; t = t + 2) {
        double *row = depth + 0;
        for (long i = (n < 3 ? n : 3); i <= m / 2 + 1; i += 1) {
            depth[2 * i] = echo[i % 2][i];
        }
    }
}
/* nest at line 2, plan: t (2*t+i); place 3 at i = t */
