/* Nests as deep and as full of accesses as they come in practice: what an answer about them costs.
   Part of an invented seabed-survey code. */
#include <math.h>

/* Factors of a tide fit's normal matrix, in place. */
void tide_factors(int n, double a[n][n])
{
  for (int k = 0; k < n; k++)
  {
    for (int i = k + 1; i < n; i++)
    {
      a[i][k] /= a[k][k];
      for (int j = k + 1; j < n; j++)
        a[i][j] -= a[i][k] * a[k][j];
    }
  }
}

/* The same of a symmetric one, row by row (Cholesky's method). */
void tide_root(int n, double a[n][n])
{
  for (int i = 0; i < n; i++)
  {
    for (int j = 0; j < i; j++)
    {
      for (int k = 0; k < j; k++)
        a[i][j] -= a[i][k] * a[j][k];
      a[i][j] /= a[j][j];
    }
    for (int k = 0; k < i; k++)
      a[i][i] -= a[i][k] * a[i][k];
    a[i][i] = sqrt(a[i][i]);
  }
}

/* Beams of every sector, summed over its hydrophones. */
void sector_beams(int n, double c[restrict n][n][n], double a[restrict n][n][n], double b[restrict n][n])
{
  for (int r = 0; r < n; r++)
    for (int q = 0; q < n; q++)
      for (int p = 0; p < n; p++)
        for (int s = 0; s < n; s++)
          c[r][q][p] += a[r][q][s] * b[s][p];
}

/* Sediment drift in a block of water, in place, step by step. */
void drift_plume(int steps, int n, double u[n][n][n])
{
  for (int t = 0; t < steps; t++)
    for (int i = 1; i < n - 1; i++)
      for (int j = 1; j < n - 1; j++)
        for (int k = 1; k < n - 1; k++)
          u[i][j][k] = 0.125 * (u[i-1][j][k] + u[i+1][j][k] + u[i][j-1][k] + u[i][j+1][k]
                              + u[i][j][k-1] + u[i][j][k+1] + 2 * u[i][j][k]);
}

/* As above, with all neighbours of a cell. */
void drift_plume_wide(int steps, int n, double u[n][n][n])
{
  for (int t = 0; t < steps; t++)
    for (int i = 1; i < n - 1; i++)
      for (int j = 1; j < n - 1; j++)
        for (int k = 1; k < n - 1; k++)
          u[i][j][k] = 0.1 * (u[i-1][j-1][k-1] + u[i-1][j-1][k] + u[i-1][j-1][k+1] + u[i-1][j][k-1] + u[i-1][j][k] + u[i-1][j][k+1]
             + u[i-1][j+1][k-1] + u[i-1][j+1][k] + u[i-1][j+1][k+1] + u[i][j-1][k-1] + u[i][j-1][k] + u[i][j-1][k+1]
             + u[i][j][k-1] + u[i][j][k] + u[i][j][k+1] + u[i][j+1][k-1] + u[i][j+1][k] + u[i][j+1][k+1]
             + u[i+1][j-1][k-1] + u[i+1][j-1][k] + u[i+1][j-1][k+1] + u[i+1][j][k-1] + u[i+1][j][k] + u[i+1][j][k+1]
             + u[i+1][j+1][k-1] + u[i+1][j+1][k] + u[i+1][j+1][k+1]);
}
