void survey(int n, int m, int w, double grid[n + 8][16], double smooth[n + 8][16]) {
    for (int i = 0; i < n; i++) {
        double line[16];
        for (int j = 0; j < 16; j++)
            line[j] = grid[i][j] * 2.0;
        for (int k = 1; k < 15; k++)
            smooth[i][k] = line[k - 1] + line[k + 1];
    }
}
/* nest at line 2, plan: k i */
