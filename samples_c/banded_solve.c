/* banded_solve.c - splines through depth profiles: solve with a banded triangular factor, many profiles at once.
 *
 * The factor has a unit diagonal and `width` entries beside it, stored in full rows for simplicity.
 * x holds one profile per column; it enters as the right side and leaves as the solution.
 * Invented survey code and data. */

/* forwards: from the first row to the last */
void
band_forward(int n, int width, int profiles, double lower[n][n], double x[n][profiles])
{
	for (int i = 0; i < n; i++)
		for (int k = i > width ? i - width : 0; k < i; k++)
			for (int p = 0; p < profiles; p++)
				x[i][p] -= lower[i][k] * x[k][p];
}

/* backwards: from the last row to the first, with the transposed factor */
void
band_backward(int n, int width, int profiles, double lower[n][n], double x[n][profiles])
{
	for (int i = n - 1; i >= 0; i--)
		for (int k = i + 1; k < n && k <= i + width; k++)
			for (int p = 0; p < profiles; p++)
				x[i][p] -= lower[k][i] * x[k][p];
}

/* one diagonal to divide by, counted down as unsigned */
void
band_scale(unsigned n, unsigned profiles, double *restrict x, const double *restrict diagonal)
{
	for (unsigned i = n; i-- > 0; )
		for (unsigned p = profiles; p-- > 0; )
			x[i * profiles + p] /= diagonal[i];
}
