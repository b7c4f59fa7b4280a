// SPDX-License-Identifier: Apache-2.0
// Replaces operator new and, with the linker's --wrap, the C functions. A file of its own, so that no call is
// inlined.
#include "engine/allocation_counter.h"

#include <atomic>
#include <cstdlib>
#include <new>

namespace {

std::atomic<long> count{0};

}  // namespace

extern "C" {
void* __real_malloc(std::size_t size);
void* __real_calloc(std::size_t count, std::size_t size);
void* __real_realloc(void* block, std::size_t size);
void* __real_aligned_alloc(std::size_t alignment, std::size_t size);

void* __wrap_malloc(std::size_t size) {
  ++count;
  return __real_malloc(size);
}
void* __wrap_calloc(std::size_t count, std::size_t size) {
  ++count;
  return __real_calloc(count, size);
}
void* __wrap_realloc(void* block, std::size_t size) {
  ++count;
  return __real_realloc(block, size);
}
void* __wrap_aligned_alloc(std::size_t alignment, std::size_t size) {
  ++count;
  return __real_aligned_alloc(alignment, size);
}
}

namespace {

void* take(std::size_t size) noexcept { return std::malloc(size > 0 ? size : 1); }
void* take(std::size_t size, std::align_val_t alignment) noexcept {
  const auto a = static_cast<std::size_t>(alignment);
  return std::aligned_alloc(a, (size + a - 1) / a * a);
}
void* need(void* block) {
  if (!block) throw std::bad_alloc();
  return block;
}

}  // namespace

// All forms: a sanitizer's own would otherwise serve some of them, and object to free().
void* operator new(std::size_t size) { return need(take(size)); }
void* operator new[](std::size_t size) { return need(take(size)); }
void* operator new(std::size_t size, std::align_val_t a) { return need(take(size, a)); }
void* operator new[](std::size_t size, std::align_val_t a) { return need(take(size, a)); }
void* operator new(std::size_t size, const std::nothrow_t&) noexcept { return take(size); }
void* operator new[](std::size_t size, const std::nothrow_t&) noexcept { return take(size); }
void* operator new(std::size_t size, std::align_val_t a, const std::nothrow_t&) noexcept {
  return take(size, a);
}
void* operator new[](std::size_t size, std::align_val_t a, const std::nothrow_t&) noexcept {
  return take(size, a);
}
void operator delete(void* block) noexcept { std::free(block); }
void operator delete[](void* block) noexcept { std::free(block); }
void operator delete(void* block, std::size_t) noexcept { std::free(block); }
void operator delete[](void* block, std::size_t) noexcept { std::free(block); }
void operator delete(void* block, std::align_val_t) noexcept { std::free(block); }
void operator delete[](void* block, std::align_val_t) noexcept { std::free(block); }
void operator delete(void* block, std::size_t, std::align_val_t) noexcept { std::free(block); }
void operator delete[](void* block, std::size_t, std::align_val_t) noexcept { std::free(block); }
void operator delete(void* block, const std::nothrow_t&) noexcept { std::free(block); }
void operator delete[](void* block, const std::nothrow_t&) noexcept { std::free(block); }

namespace steelyard::engine {

long allocations() { return count; }

}  // namespace steelyard::engine
