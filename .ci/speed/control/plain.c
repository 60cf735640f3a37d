/* The control of `make speed`: a plain string as scalar C, one string at a time.
   128 strings, periods of 64 frames: the read of the delay line, two poles of
   loss, the line, and the sum of all strings in stereo. Prints ns per string-sample.

   TAPS is 12 with the loss in double precision for the same arithmetic as the
   program's, 8 with float for the one that is usual. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#ifndef TAPS
#define TAPS 12
#endif
#if TAPS == 12
typedef double state;
#else
typedef float state;
#endif

enum { STRINGS = 128, PERIOD = 64, LINE = 8192 };

struct string {
	float line[LINE];
	int at, back;
	float h[TAPS];
	state c1, c2, v1, v2;
	float left, right, power;
};

static struct string all[STRINGS];
static float left[PERIOD], right[PERIOD];

static void render(struct string *s, int n)
{
	if (s->at + n > LINE) {
		memcpy(s->line, s->line + s->at - 2048, 2048 * sizeof(float));
		s->at = 2048;
	}
	const float *src = s->line + s->at - s->back;
	float *dst = s->line + s->at;
	state c1 = s->c1, c2 = s->c2, v1 = s->v1, v2 = s->v2;
	float power = s->power;
	for (int i = 0; i < n; i++) {
		float x = 1e-18f;
		for (int t = 0; t < TAPS; t++)
			x += s->h[t] * src[i + t];
		state v = x - c2 * v2 - c1 * v1;
		v2 = v1;
		v1 = v;
		float y = v;
		dst[i] = y;
		left[i] += y * s->left;
		right[i] += y * s->right;
		power += y * y;
	}
	s->v1 = v1, s->v2 = v2, s->power = power;
	s->at += n;
}

static double now(void)
{
	struct timespec t;
	clock_gettime(CLOCK_MONOTONIC, &t);
	return t.tv_sec * 1e9 + t.tv_nsec;
}

int main(int argc, char **argv)
{
	double wanted = (argc > 1 ? atof(argv[1]) : 0.2) * 1e9;
	float sum = 0;
	for (int k = 0; k < STRINGS; k++) {
		struct string *s = &all[k];
		s->at = 2048;
		/* keys 28 to 91, the lengths of their periods at 48 kHz */
		s->back = 48000 / (41.2 * (1 + 37.0 * k / STRINGS)) + TAPS;
		for (int t = 0; t < TAPS; t++)
			s->h[t] = 0.97f / TAPS;
		s->c1 = -0.1, s->c2 = 0.02;
		s->left = 0.5f, s->right = 0.4f;
		for (int i = 0; i < LINE; i++)
			s->line[i] = (float)rand() / RAND_MAX - 0.5f;
	}
	long periods = 0;
	double start = now(), ns;
	do {
		memset(left, 0, sizeof left);
		memset(right, 0, sizeof right);
		for (int k = 0; k < STRINGS; k++)
			render(&all[k], PERIOD);
		for (int i = 0; i < PERIOD; i++)
			sum += left[i] + right[i];
		periods++;
		ns = now() - start;
	} while (ns < wanted);
	fprintf(stderr, "%g\n", sum);
	printf("%.3f\n", ns / periods / STRINGS / PERIOD);
	return 0;
}
