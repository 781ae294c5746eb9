/* The one place of FFTW: cached estimated plans. */
#include "server/wave/fft.h"

#include <fftw3.h>
#include <pthread.h>
#include <string.h>

#include "server/base/check.h"

enum kind { FORWARD, INVERSE, INVERSE_COMPLEX, KINDS };
#define CACHED 64

/* The planner is not thread-safe: one lock around it. Plans live as long as the process. */
static pthread_mutex_t lock = PTHREAD_MUTEX_INITIALIZER;
static struct {
	size_t n;
	enum kind kind;
	fftw_plan plan;
} cache[CACHED];

double *fft_real_new(size_t n)
{
	double *p = fftw_alloc_real(n > 0 ? n : 1);
	CHECK(p != NULL && "out of memory");
	memset(p, 0, n * sizeof *p);
	return p;
}

double complex *fft_complex_new(size_t n)
{
	double complex *p = fftw_alloc_complex(n > 0 ? n : 1);
	CHECK(p != NULL && "out of memory");
	memset(p, 0, n * sizeof *p);
	return p;
}

void fft_free(void *p)
{
	fftw_free(p);
}

size_t fft_length(size_t least)
{
	size_t n = 16;
	while (n < least)
		n *= 2;
	return n;
}

static fftw_plan make(size_t n, enum kind kind)
{
	double *r = fft_real_new(n);
	double complex *a = fft_complex_new(n), *b = fft_complex_new(n);
	fftw_plan p = kind == FORWARD   ? fftw_plan_dft_r2c_1d((int)n, r, a, FFTW_ESTIMATE)
	              : kind == INVERSE ? fftw_plan_dft_c2r_1d((int)n, a, r, FFTW_ESTIMATE)
	                                : fftw_plan_dft_1d((int)n, a, b, FFTW_BACKWARD, FFTW_ESTIMATE);
	CHECK(p != NULL);
	fft_free(r);
	fft_free(a);
	fft_free(b);
	return p;
}

/* A full cache makes a plan for one use; *once tells the caller to destroy it. */
static fftw_plan plan_for(size_t n, enum kind kind, int *once)
{
	fftw_plan p = NULL;
	*once = 0;
	pthread_mutex_lock(&lock);
	for (int i = 0; i < CACHED && p == NULL; i++) {
		if (cache[i].plan == NULL) {
			cache[i].n = n;
			cache[i].kind = kind;
			cache[i].plan = make(n, kind);
		}
		if (cache[i].n == n && cache[i].kind == kind)
			p = cache[i].plan;
	}
	if (p == NULL) {
		p = make(n, kind);
		*once = 1;
	}
	pthread_mutex_unlock(&lock);
	return p;
}

static void done(fftw_plan p, int once)
{
	if (!once)
		return;
	pthread_mutex_lock(&lock);
	fftw_destroy_plan(p);
	pthread_mutex_unlock(&lock);
}

void fft_forward(size_t n, double *in, double complex *out)
{
	int once;
	fftw_plan p = plan_for(n, FORWARD, &once);
	fftw_execute_dft_r2c(p, in, out);
	done(p, once);
}

void fft_inverse(size_t n, double complex *in, double *out)
{
	int once;
	fftw_plan p = plan_for(n, INVERSE, &once);
	fftw_execute_dft_c2r(p, in, out);
	done(p, once);
}

void fft_inverse_complex(size_t n, double complex *in, double complex *out)
{
	int once;
	fftw_plan p = plan_for(n, INVERSE_COMPLEX, &once);
	fftw_execute_dft(p, in, out);
	done(p, once);
}
