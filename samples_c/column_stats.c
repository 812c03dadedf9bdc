/*
    column_stats.c

    Mean and spread of every beam over a line of pings: which beams are noisy?

    readings are pings x beams, so one beam is a column.  The loops go beam by beam, the slow way round.
    Invented code of an invented survey.
*/

void beam_sums(int pings, int beams, const float *readings, double *sum, double *squares)
{
    int ping;       /* declared here since 1989 */
    int beam;

    for (beam = 0; beam < beams; beam++)
    {
        for (ping = 0; ping < pings; ping++)
        {
            sum[beam] += readings[ping * beams + beam];
            squares[beam] += (double)readings[ping * beams + beam] * readings[ping * beams + beam];
        }
    }
}

/* Deepest and shoalest reading of each beam. */
void beam_range(int pings, int beams, float readings[pings][beams], float *shoalest, float *deepest)
{
    int ping, beam;

    for (beam = 0; beam < beams; beam++)
    {
        for (ping = 0; ping < pings; ping++)
        {
            shoalest[beam] = readings[ping][beam] < shoalest[beam] ? readings[ping][beam] : shoalest[beam];
            deepest[beam] = readings[ping][beam] > deepest[beam] ? readings[ping][beam] : deepest[beam];
        }
    }
}

/* Take the mean out of every column. */
void remove_means(int pings, int beams, float readings[pings][beams], const float *mean)
{
    for (int beam = 0; beam < beams; beam++)
    {
        for (int ping = 0; ping < pings; ping++)
        {
            readings[ping][beam] -= mean[beam];
        }
    }
}
