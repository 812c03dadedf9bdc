/*
 * depth_smooth.c: smooth a depth grid with its four neighbours, out of place.
 *
 * Grids are structs behind pointers, rows first.  Depths in metres, positive down.
 * Invented survey code; every grid that it has ever seen was made up.
 */

struct depth_grid {
	int rows;
	int cols;
	double *depth;		/* rows * cols values */
};

#define DEPTH(g, r, c) ((g)->depth[(r) * (g)->cols + (c)])

void smooth_grid(struct depth_grid *to, const struct depth_grid *from)
{
	int r, c;

	/* the rim is left as it is */
	for (r = 1; r < from->rows - 1; r++) {
		for (c = 1; c < from->cols - 1; c++) {
			DEPTH(to, r, c) = 0.5 * DEPTH(from, r, c)	/* itself */
				+ 0.125 * (DEPTH(from, r - 1, c) + DEPTH(from, r + 1, c)
					 + DEPTH(from, r, c - 1) + DEPTH(from, r, c + 1));
		}
	}
}

/* The same on plain arrays, with weights from the caller. */
void smooth_rows(int rows, int cols, double to[rows][cols], double from[rows][cols], double keep)
{
	double share = (1.0 - keep) / 4.0;

	for (int r = 1; r < rows - 1; r++)
		for (int c = 1; c < cols - 1; c++)
			to[r][c] = keep * from[r][c]
				 + share * (from[r - 1][c] + from[r + 1][c] + from[r][c - 1] + from[r][c + 1]);
}

/* How far two surveys of the same ground are apart, per cell; column by column, as the old reader stored it. */
void depth_change(int rows, int cols, double change[rows][cols], double before[rows][cols],
		  double after[rows][cols])
{
	for (int c = 0; c < cols; c++)
		for (int r = 0; r < rows; r++)
			change[r][c] = after[r][c] - before[r][c];
}
