/*
 * tidal_factor.c
 *
 * Factorise the normal equations of a tide fit, in place: a = L * L' or a = L * U.
 * No pivoting: the matrices are well conditioned by construction.  Rows have the distance ld.
 *
 * Invented survey code; matrices come from a generator.
 */
#include <math.h>
#include <stddef.h>

/* L with unit diagonal below, U on and above the diagonal. */
void tidal_lu(ptrdiff_t n, double *a, ptrdiff_t ld)
{
    for (ptrdiff_t k = 0; k < n; k++) {
        for (ptrdiff_t i = k + 1; i < n; i++)
            a[i*ld + k] /= a[k*ld + k];
        for (ptrdiff_t i = k + 1; i < n; i++)
            for (ptrdiff_t j = k + 1; j < n; j++)
                a[i*ld + j] -= a[i*ld + k] * a[k*ld + j];
    }
}

/* Lower triangle only; what stands above the diagonal is not looked at. */
void tidal_cholesky(int n, double a[n][n])
{
    for (int j = 0; j < n; j++) {
        for (int k = 0; k < j; k++)
            for (int i = j; i < n; i++)
                a[i][j] -= a[i][k] * a[j][k];
        a[j][j] = sqrt(a[j][j]);
        for (int i = j + 1; i < n; i++)
            a[i][j] /= a[j][j];
    }
}

/* Solve L x = b for several right sides, all rows of b. */
void tidal_forward(int n, int sides, double a[n][n], double b[sides][n])
{
    for (int s = 0; s < sides; s++)
        for (int i = 0; i < n; i++)
            for (int k = 0; k < i; k++)
                b[s][i] -= a[i][k] * b[s][k];
}
