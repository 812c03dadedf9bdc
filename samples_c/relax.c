/*
 * relax.c - fill gaps of a depth grid by relaxation, in place.
 *
 * Every sweep replaces each inner cell by the mean of its neighbours, using the new values as soon as they are there
 * (Gauss-Seidel).  With four neighbours rows and columns may be exchanged; with eight they may not, because the cell
 * to the upper right must be new and would still be old.
 *
 * Invented survey code, invented depths.
 */

void relax_four(int sweeps, int n, int m, double z[n][m])
{
  for (int s = 0; s < sweeps; s++)
  {
    for (int i = 1; i < n - 1; i++)
    {
      for (int j = 1; j < m - 1; j++)
      {
        z[i][j] = 0.25 * (z[i-1][j] + z[i][j-1] + z[i][j+1] + z[i+1][j]);
      }
    }
  }
}

void relax_eight(int n, int m, double z[n][m])
{
  for (int i = 1; i < n - 1; i++)
  {
    for (int j = 1; j < m - 1; j++)
    {
      z[i][j] = 0.125 * (z[i-1][j-1] + z[i-1][j] + z[i-1][j+1] + z[i][j-1]
                       + z[i][j+1] + z[i+1][j-1] + z[i+1][j] + z[i+1][j+1]);
    }
  }
}

/* One colour of a chequered pattern at a time: cells of one colour do not read each other. */
void relax_colour(int n, int m, double z[n][m], int colour)
{
  for (int i = 1; i < n - 1; i++)
    for (int j = 1; j < m - 1; j++)
      if ((i + j) % 2 == colour)
        z[i][j] = 0.25 * (z[i-1][j] + z[i][j-1] + z[i][j+1] + z[i+1][j]);
}
