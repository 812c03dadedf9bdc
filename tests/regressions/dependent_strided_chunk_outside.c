void survey(int n, int m, double a[n][m]) {
    for (int i = 0; i < n; i++)
        for (int j = m - i; j >= 0; j -= 3)
            a[i][j] += 1.0;
}
/* nest at line 2, plan: j:2 i j */
