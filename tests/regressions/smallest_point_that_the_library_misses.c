struct sounding { double low; double high; };
void survey(int n, int m, int w, struct sounding *depth) {
    for (int t = 0; t <= n; t += 2) {
        for (unsigned short i = 0; i < (w + 2) / 3; i += 1) {
            double factor = 0.5 * (depth[i + 1].low);
            for (unsigned short j = (n < 5 ? n : 5) - 1; j > 1; j -= 2) {
                if (depth[j].low > 1) {
                    factor += depth[j].high;
                }
                for (unsigned short k = 0; k < 2 * i; k += 1) {
                    depth[2 * k + 1].high = depth[t].low;
                }
            }
        }
    }
}
/* nest at line 3, plan: j:3 j (j-k) i:2 t:6 t:4 t:2 t i */
