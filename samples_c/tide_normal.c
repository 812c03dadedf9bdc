/*
** tide_normal.c
**
** Least-squares fit of tidal constituents to a gauge record: the normal equations N = A'A and right side A'y.
** A has one row per reading and one column per cosine or sine of a constituent; only the lower triangle of N is
** formed.  Everything about the gauges is invented.
*/

#define A(i, k)  design[(i) * terms + (k)]      /* reading i, term k */
#define N(k, l)  normal[(k) * terms + (l)]

void tide_normal_matrix(int readings, int terms, const double *restrict design, double *restrict normal)
{
    int i, k, l;

    for (k = 0; k < terms; k++)
    {
        for (l = 0; l <= k; l++)
        {
            for (i = 0; i < readings; i++)
            {
                N(k, l) += A(i, k) * A(i, l);
            }
        }
    }
}

void tide_right_side(int readings, int terms, const double *restrict design, const double *restrict level,
                     double *restrict right)
{
    int i, k;

    for (k = 0; k < terms; k++)
    {
        right[k] = 0.0;
        for (i = 0; i < readings; i++)
            right[k] += A(i, k) * level[i];
    }
}

/* Fill the upper triangle from the lower one, for solvers that want all of it. */
void tide_mirror(int terms, double *normal)
{
    for (int k = 0; k < terms; k++)
    {
        for (int l = k + 1; l < terms; l++)
        {
            N(k, l) = N(l, k);
        }
    }
}
