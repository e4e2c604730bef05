/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The images of a flat, kept small. */
#include <math.h>
#include <string.h>

#include "calibrate/flat_parts.h"

void uf_flat_stack_free(uf_flat_stack *stack)
{
    uf_arena_free(&stack->arena);
    *stack = (uf_flat_stack){0};
}

static int fits_into_16_bits(uf_plane image)
{
    for (int y = 0; y < image.height; y++) {
        const float *row = uf_plane_row(image, y);
        for (int x = 0; x < image.width; x++)
            if (!(row[x] >= 0.0f && row[x] <= 65535.0f && row[x] == floorf(row[x])))
                return 0;
    }
    return 1;
}

static uf_status keep(uf_flat_stack *stack, uf_plane image, struct uf_flat_image *kept, uf_error *error)
{
    size_t width = (size_t)image.width, pixels = width * (size_t)image.height;
    int whole = fits_into_16_bits(image);
    void *memory = uf_arena_take(&stack->arena, pixels * (whole ? sizeof(uint16_t) : sizeof(float)));
    if (!memory)
        return uf_fail(
            error, UF_MEMORY,
            "the machine has no memory for %d images of %d x %d pixels; use fewer images (20 to 50 do for most "
            "flats)",
            stack->count + 1, image.width, image.height);
    *kept = (struct uf_flat_image){.fingerprint = uf_plane_fingerprint(image)};
    if (whole)
        kept->whole = memory;
    else
        kept->real = memory;
    for (int y = 0; y < image.height; y++) {
        const float *row = uf_plane_row(image, y);
        for (size_t x = 0; whole && x < width; x++)
            kept->whole[(size_t)y * width + x] = (uint16_t)row[x];
        if (!whole)
            memcpy(kept->real + (size_t)y * width, row, width * sizeof *row);
    }
    return UF_OK;
}

static uf_status refuse(const uf_flat_stack *stack, uf_plane image, uf_error *error)
{
    int number = stack->count + 1;
    if (stack->count && (image.width != stack->width || image.height != stack->height))
        return uf_fail(error, UF_INPUT, "image %d is %d x %d pixels, those before it %d x %d; all need one size",
                       number, image.width, image.height, stack->width, stack->height);
    if (stack->count >= UF_FLAT_IMAGES_MOST)
        return uf_fail(error, UF_INPUT, "more than %d images; fewer do as well", UF_FLAT_IMAGES_MOST);
    uint64_t fingerprint = uf_plane_fingerprint(image);
    for (int k = 0; k < stack->count; k++)
        if (stack->images[k].fingerprint == fingerprint)
            return uf_fail(error, UF_INPUT, "image %d is the same as image %d, pixel for pixel; give each field once",
                           number, k + 1);
    return UF_OK;
}

uf_status uf_flat_add(uf_flat_stack *stack, uf_plane image, uf_error *error)
{
    uf_status status = refuse(stack, image, error);
    if (status == UF_OK && !stack->images) {
        stack->images = uf_arena_take(&stack->arena, UF_FLAT_IMAGES_MOST * sizeof *stack->images);
        if (!stack->images)
            status = uf_fail_memory(error, "images of a flat");
    }
    if (status == UF_OK)
        status = keep(stack, image, &stack->images[stack->count], error);
    if (status != UF_OK)
        return status;
    uf_count_step_add(&stack->step, image);
    stack->width = image.width;
    stack->height = image.height;
    stack->count++;
    return UF_OK;
}

void uf_flat_row(const uf_flat_stack *stack, int k, int y, float *out)
{
    size_t width = (size_t)stack->width;
    const struct uf_flat_image *image = stack->images + k;
    if (image->real)
        memcpy(out, image->real + (size_t)y * width, width * sizeof *out);
    for (size_t x = 0; image->whole && x < width; x++)
        out[x] = (float)image->whole[(size_t)y * width + x];
}

void uf_flat_signal_row(const uf_flat_stack *stack, const uf_flat_request *request, int k, int y, float *out)
{
    uf_flat_row(stack, k, y, out);
    const float *dark = request->dark.data ? uf_plane_row(request->dark, y) : NULL;
    float offset = (float)request->offset_adu;
    for (int x = 0; x < stack->width; x++)
        out[x] -= dark ? dark[x] : offset;
}
