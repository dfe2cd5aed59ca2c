/* A textbook expectation step: forward and backward with one scaling factor a base, all forward
   vectors stored (Rabiner 1989, Proceedings of the IEEE 77: 257-286, section V). A base's code
   is the base with its context; emissions are given by state and code. */

#include <math.h>
#include <stdint.h>

#define K STATES

double expect(const uint16_t *codes, long n, const double *start, const double *transitions,
              const double *emissions, long n_codes, double *alpha, double *scale,
              double *transition_counts, double *emission_counts)
{
    double beta[K], next[K], log_likelihood = 0.0;
    for (long t = 0; t < n; t++) {
        double *now = alpha + t * K, total = 0.0;
        for (int j = 0; j < K; j++) {
            double value = 0.0;
            if (t == 0)
                value = start[j];
            else
                for (int i = 0; i < K; i++)
                    value += now[i - K] * transitions[i * K + j];
            now[j] = value * emissions[j * n_codes + codes[t]];
            total += now[j];
        }
        for (int j = 0; j < K; j++)
            now[j] /= total;
        scale[t] = total;
        log_likelihood += log(total);
    }
    for (int i = 0; i < K; i++)
        beta[i] = 1.0;
    for (long t = n - 1; t >= 0; t--) {
        const double *now = alpha + t * K;
        for (int j = 0; j < K; j++)
            emission_counts[j * n_codes + codes[t]] += now[j] * beta[j];
        if (t == 0)
            break;
        for (int j = 0; j < K; j++)
            next[j] = emissions[j * n_codes + codes[t]] * beta[j] / scale[t];
        for (int i = 0; i < K; i++) {
            double value = 0.0;
            for (int j = 0; j < K; j++) {
                double step = transitions[i * K + j] * next[j];
                transition_counts[i * K + j] += now[i - K] * step;
                value += step;
            }
            beta[i] = value;
        }
    }
    return log_likelihood;
}
