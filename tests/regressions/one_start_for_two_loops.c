void survey(short n, short m, short w, double swath[n + 3][m + 3][w + 3]) {
    for (short t = 0; t < w; t += 1) {
        for (short i = t > 1 ? t - 1 : 0; i < (t + 2 < n ? t + 2 : n); i++) {
            double sum = 0.0;
            for (short j = 0; j < 2 * t; ++j) {
                sum += swath[t][j][i];
            }
            for (short j = 0; j < n - 1; j += 2) {
                sum += swath[t][j + 1][i + 1] * sum;
            }
            swath[t][0][i] = sum;
        }
    }
}
/* nest at line 2, plan: t i:5 i:2 j@5:2 i j@5 j@8 */
