/* first_return.c -- where does the bottom begin?  Finds the first strong sample of each beam.
 *
 * Both ways of leaving a loop early: how many iterations there are depends on the data.
 * Invented survey code and echoes.
 */

void first_returns(int beams, int samples, const float *echo, float threshold, int *first)
{
    int b, s;
    for (b = 0; b < beams; b++) {
        first[b] = samples;
        for (s = 0; s < samples; s++) {
            if (echo[b * samples + s] > threshold) {
                first[b] = s;
                break;
            }
        }
    }
}

void first_returns_by_halving(int beams, int samples, const float *rising, float threshold, int *first)
{
    for (int b = 0; b < beams; b++) {
        int low = 0, high = samples;
        while (low < high) {
            int middle = low + (high - low) / 2;
            if (rising[b * samples + middle] > threshold)
                high = middle;
            else
                low = middle + 1;
        }
        first[b] = low;
    }
}

/* Readings until the recorder's end mark; the end mark is data. */
double sum_until_mark(const double *reading, double mark)
{
    double sum = 0;
    for (int i = 0; reading[i] != mark; i++)
        sum += reading[i];
    return sum;
}
