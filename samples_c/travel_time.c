/*
 * travel_time.c - from travel times to depths.
 *
 * The sound speed comes from a function of another file; what else that function may touch cannot be seen here.
 * Invented survey code; the speeds are invented as well.
 */
#include <math.h>

extern double sound_speed_at(int ping, double seconds);

void depths_from_times(int pings, int beams, double depth[pings][beams], double seconds[pings][beams])
{
    for (int b = 0; b < beams; b++) {
        for (int p = 0; p < pings; p++) {
            depth[p][b] = 0.5 * seconds[p][b] * sound_speed_at(p, seconds[p][b]);
        }
    }
}

/* With one speed for all, and slanted beams. */
void depths_at_one_speed(int pings, int beams, double depth[pings][beams], double seconds[pings][beams],
                         const double *angle, double speed)
{
    for (int b = 0; b < beams; b++) {
        for (int p = 0; p < pings; p++) {
            depth[p][b] = 0.5 * speed * seconds[p][b] * cos(angle[b]);
        }
    }
}
