/* drift.c -- sediment drifting with the current, in small steps of time.
 *
 * Explicit scheme: the load of a cell at time t+1 comes from the loads around it at time t.  Two layers of memory take
 * turns (t % 2), or two arrays are swept one after the other.  Because a block of cells needs its neighbours of the
 * step before, blocks over time and place together are only right when they are skewed.
 *
 * The coast, the current and the sediment are invented. */

enum { LAYERS = 2 };

/* along a transect */
void drift_transect(int steps, int cells, double load[LAYERS][cells], double speed)
{
    for (int t = 0; t < steps; t++)
        for (int x = 1; x < cells - 1; x++)
            load[(t + 1) % 2][x] = load[t % 2][x]
                + speed * (load[t % 2][x - 1] - 2.0 * load[t % 2][x] + load[t % 2][x + 1]);
}

/* over an area: first the new loads, then back, in one loop over time */
void drift_area(int steps, int rows, int cols, double *restrict load, double *restrict next, double share) {
    int t, y, x;
    for (t = 0; t < steps; t += 1) {
        for (y = 1; y <= rows - 2; y += 1)
            for (x = 1; x <= cols - 2; x += 1)
                next[y*cols + x] = load[y*cols + x] * (1 - 4*share)
                                 + share * (load[(y-1)*cols + x] + load[(y+1)*cols + x]
                                          + load[y*cols + x-1] + load[y*cols + x+1]);
        for (y = 1; y <= rows - 2; y += 1)
            for (x = 1; x <= cols - 2; x += 1)
                load[y*cols + x] = next[y*cols + x];
    }
}

/* what settles leaves the water for good: each cell on its own, all steps */
void settle(int steps, int cells, float *suspended, float *settled, float rate)
{
    for (int t = 0; t < steps; t++) {
        for (int x = 0; x < cells; x++) {
            settled[x] += rate * suspended[x];
            suspended[x] -= rate * suspended[x];
        }
    }
}
