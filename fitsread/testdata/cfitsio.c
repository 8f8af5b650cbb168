/* What cfitsio makes of a file, for comparison.
 *
 * pack IN OUT ROWS METHOD: copy a file with its tables compressed in tiles of ROWS
 *     rows, columns by METHOD or, for "", as cfitsio likes.
 * read FILE N COLUMN...: open, read columns of the second HDU as doubles, close, N
 *     times over; prints the best time in microseconds and the sum of all values.
 */
#include <fitsio.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static int fail(int status)
{
	fits_report_error(stderr, status);
	return 1;
}

static int pack(char **arg)
{
	fitsfile *in, *out;
	int status = 0, hdus, type, columns;
	fits_open_file(&in, arg[0], READONLY, &status);
	fits_create_file(&out, arg[1], &status);
	fits_get_num_hdus(in, &hdus, &status);
	for (int i = 1; i <= hdus && !status; i++) {
		fits_movabs_hdu(in, i, &type, &status);
		if (type != BINARY_TBL) {
			fits_copy_hdu(in, out, 0, &status);
			continue;
		}
		/* a copy in memory that carries the wishes as cards */
		fitsfile *mem;
		long rows = atol(arg[2]);
		fits_create_file(&mem, "mem://", &status);
		fits_copy_file(in, mem, 0, 1, 0, &status);
		fits_movabs_hdu(mem, 2, NULL, &status);
		fits_write_key(mem, TLONG, "FZTILELN", &rows, NULL, &status);
		fits_get_num_cols(mem, &columns, &status);
		for (int k = 1; k <= columns && arg[3][0]; k++) {
			char key[16];
			snprintf(key, sizeof key, "FZALG%d", k);
			fits_write_key(mem, TSTRING, key, arg[3], NULL, &status);
		}
		fits_compress_table(mem, out, &status);
		fits_close_file(mem, &status);
	}
	fits_close_file(in, &status);
	fits_close_file(out, &status);
	return status ? fail(status) : 0;
}

static int read_columns(int n, char **arg)
{
	double best = 1e99, sum = 0;
	for (int k = atoi(arg[1]); k > 0; k--) {
		struct timespec a, b;
		fitsfile *f;
		int status = 0, col;
		long rows;
		clock_gettime(CLOCK_MONOTONIC, &a);
		sum = 0;
		fits_open_file(&f, arg[0], READONLY, &status);
		fits_movabs_hdu(f, 2, NULL, &status);
		fits_get_num_rows(f, &rows, &status);
		if (status)
			return fail(status);
		double *v = malloc(rows * sizeof *v);
		for (int i = 2; i < n; i++) {
			fits_get_colnum(f, CASEINSEN, arg[i], &col, &status);
			fits_read_col(f, TDOUBLE, col, 1, 1, rows, NULL, v, NULL, &status);
			for (long r = 0; r < rows; r++)
				sum += v[r];
		}
		free(v);
		fits_close_file(f, &status);
		clock_gettime(CLOCK_MONOTONIC, &b);
		if (status)
			return fail(status);
		double us = (b.tv_sec - a.tv_sec) * 1e6 + (b.tv_nsec - a.tv_nsec) / 1e3;
		if (us < best)
			best = us;
	}
	printf("%.3f %.17g\n", best, sum);
	return 0;
}

int main(int n, char **arg)
{
	if (n == 6 && !strcmp(arg[1], "pack"))
		return pack(arg + 2);
	if (n > 4 && !strcmp(arg[1], "read"))
		return read_columns(n - 2, arg + 2);
	fprintf(stderr, "usage: pack IN OUT ROWS METHOD | read FILE N COLUMN...\n");
	return 2;
}
