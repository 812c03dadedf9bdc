/*********************************************************************
 * track_match.c                                                     *
 *                                                                   *
 * Match two passes over the same ground by dynamic programming: the *
 * cheapest way to pair the depths of one track with those of the    *
 * other, where either may pause (time warping).                     *
 *                                                                   *
 * Both tracks are invented.                                         *
 *********************************************************************/

#define COST(i, j) cost[(i) * (m + 1) + (j)]

/* Row 0 and column 0 of the costs are set by the caller. */
void match_tracks(int n, int m, const int *first, const int *second, int *cost)
{
	for (int i = 1; i <= n; ++i)
	{
		for (int j = 1; j <= m; ++j)
		{
			int apart = first[i - 1] - second[j - 1];
			int best = COST(i - 1, j - 1);

			if (COST(i - 1, j) < best)
				best = COST(i - 1, j);	// the second track pauses
			if (COST(i, j - 1) < best)
				best = COST(i, j - 1);	// the first track pauses
			COST(i, j) = best + (apart < 0 ? -apart : apart);
		}
	}
}

/* The longest stretch of equal soundings that the tracks share, ending at each pair; a VLA with its own rim. */
void common_stretches(int n, int m, int length[n + 1][m + 1], const short *first, const short *second)
{
	for (int i = 1; i <= n; ++i)
		for (int j = 1; j <= m; ++j)
			length[i][j] = first[i - 1] == second[j - 1] ? length[i - 1][j - 1] + 1 : 0;
}
