// SPDX-License-Identifier: Apache-2.0
// Counts the allocations of this program's own code.
#pragma once

namespace steelyard::engine {

/// So far, by all threads: operator new, malloc, calloc, realloc, aligned_alloc.
[[nodiscard]] long allocations();

}  // namespace steelyard::engine
