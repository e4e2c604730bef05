/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/optics.h"

#include "run/optics_numbers.h"

uf_status uf_optics_report(const uf_optics_request *request, uf_text *out, uf_error *error)
{
    uf_optics_numbers numbers;
    uf_status status = uf_optics_find(request, &numbers, error);
    if (status != UF_OK)
        return status;
    if (request->as_json)
        status = uf_optics_put_json(out, &numbers, error);
    else
        uf_optics_put_words(out, &numbers);
    if (status == UF_OK && request->plot_path)
        status = uf_optics_plot(&numbers, request->plot_path, error);
    if (status == UF_OK && request->plot_path && !request->as_json)
        uf_text_printf(out, "Plot written to %s\n", request->plot_path);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}
