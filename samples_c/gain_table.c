/*
 * gain_table.c - apply gain over range and tilt to raw sample counts.
 *
 * Fixed tables in file scope, sizes from the build (-D TILTS=...), iterators declared long before, a loop
 * that comes out of a macro, rows of pointers, and a pointer that walks where an index would do.
 * Invented survey code; the gains are not those of any sonar.
 */
#ifndef TILTS
#define TILTS 40
#endif
#ifndef RANGES
#define RANGES 600
#endif

double gain[TILTS][RANGES];
double level[TILTS][RANGES];
static int count[RANGES][TILTS];

#define FOR_EACH_TILT(t) for ((t) = 0; (t) < TILTS; (t)++)

void apply_gain(double offset)
{
    int range, tilt;

    for (range = 0; range != RANGES; range += 1)
        for (tilt = TILTS - 1; tilt >= 0; --tilt)
            level[tilt][range] = gain[tilt][range] * (count[range][tilt] - offset);
}

/* A loop that comes out of a macro has no text of its own to rewrite. */
void clear_counts(void)
{
    int range, tilt;

    for (range = 0; range < RANGES; range++)
        FOR_EACH_TILT(tilt)
            count[range][tilt] = 0;
}

/* Rows that live anywhere: nothing says that two of them are distinct. */
void scale_rows(double **rows, int n, int m, double factor)
{
    for (int j = 0; j < m; j++)
        for (int i = 0; i < n; i++)
            rows[i][j] *= factor;
}

/* A pointer that walks. */
void clear_levels(double *at, int n)
{
    for (int i = 0; i < n; i++)
        *at++ = 0.0;
}
