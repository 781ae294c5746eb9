/* Discrete Fourier transforms; the only user of FFTW. Plans are estimated (repeatable bits), cached by length, and made
 * under one lock; executing them is free of locks. */
#ifndef QB_WAVE_FFT_H
#define QB_WAVE_FFT_H

#include <complex.h>
#include <stddef.h>

double *fft_real_new(size_t n); /* aligned, zeroed; fft_free */
double complex *fft_complex_new(size_t n);
void fft_free(void *p);
size_t fft_length(size_t least); /* the next power of two */

/* Arrays from the functions above. X_k = sum x_j exp(-2 pi i j k / n), k = 0 .. n/2. */
void fft_forward(size_t n, double *in, double complex *out);
/* x_j = sum over the whole spectrum, not divided by n; `in` is destroyed. */
void fft_inverse(size_t n, double complex *in, double *out);
/* Complex, sign +1 (inverse), not divided by n; in and out differ. */
void fft_inverse_complex(size_t n, double complex *in, double complex *out);

#endif
