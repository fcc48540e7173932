#include <stdint.h>

/* Milstein's scheme on dX = mu X dt + sigma X dW. */
int milstein_path(int64_t steps, int64_t paths, double t, double h, const double *params,
                  const double *x, const double *noise, double *end)
{
    const double mu = params[0], sigma = params[1];

    for (int64_t j = 0; j < paths; j++)
        end[j] = x[j];
    for (int64_t k = 0; k < steps; k++) {
        const double *dw = noise + k * paths;
        for (int64_t j = 0; j < paths; j++) {
            double b = sigma * end[j];
            end[j] += mu * end[j] * h + b * dw[j] + 0.5 * b * sigma * (dw[j] * dw[j] - h);
        }
    }
    return 0;
}
