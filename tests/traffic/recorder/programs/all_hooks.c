// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Links only if the recorder has every hook that the compilers may call.

// The 83 of gcc 12.2: `strings $(gcc -print-prog-name=cc1)`, names that begin with __builtin___tsan_.
#define HOOKS_OF_GCC(NAME) \
  NAME(__tsan_atomic128_compare_exchange_strong) \
  NAME(__tsan_atomic128_compare_exchange_weak) \
  NAME(__tsan_atomic128_exchange) \
  NAME(__tsan_atomic128_fetch_add) \
  NAME(__tsan_atomic128_fetch_and) \
  NAME(__tsan_atomic128_fetch_nand) \
  NAME(__tsan_atomic128_fetch_or) \
  NAME(__tsan_atomic128_fetch_sub) \
  NAME(__tsan_atomic128_fetch_xor) \
  NAME(__tsan_atomic128_load) \
  NAME(__tsan_atomic128_store) \
  NAME(__tsan_atomic16_compare_exchange_strong) \
  NAME(__tsan_atomic16_compare_exchange_weak) \
  NAME(__tsan_atomic16_exchange) \
  NAME(__tsan_atomic16_fetch_add) \
  NAME(__tsan_atomic16_fetch_and) \
  NAME(__tsan_atomic16_fetch_nand) \
  NAME(__tsan_atomic16_fetch_or) \
  NAME(__tsan_atomic16_fetch_sub) \
  NAME(__tsan_atomic16_fetch_xor) \
  NAME(__tsan_atomic16_load) \
  NAME(__tsan_atomic16_store) \
  NAME(__tsan_atomic32_compare_exchange_strong) \
  NAME(__tsan_atomic32_compare_exchange_weak) \
  NAME(__tsan_atomic32_exchange) \
  NAME(__tsan_atomic32_fetch_add) \
  NAME(__tsan_atomic32_fetch_and) \
  NAME(__tsan_atomic32_fetch_nand) \
  NAME(__tsan_atomic32_fetch_or) \
  NAME(__tsan_atomic32_fetch_sub) \
  NAME(__tsan_atomic32_fetch_xor) \
  NAME(__tsan_atomic32_load) \
  NAME(__tsan_atomic32_store) \
  NAME(__tsan_atomic64_compare_exchange_strong) \
  NAME(__tsan_atomic64_compare_exchange_weak) \
  NAME(__tsan_atomic64_exchange) \
  NAME(__tsan_atomic64_fetch_add) \
  NAME(__tsan_atomic64_fetch_and) \
  NAME(__tsan_atomic64_fetch_nand) \
  NAME(__tsan_atomic64_fetch_or) \
  NAME(__tsan_atomic64_fetch_sub) \
  NAME(__tsan_atomic64_fetch_xor) \
  NAME(__tsan_atomic64_load) \
  NAME(__tsan_atomic64_store) \
  NAME(__tsan_atomic8_compare_exchange_strong) \
  NAME(__tsan_atomic8_compare_exchange_weak) \
  NAME(__tsan_atomic8_exchange) \
  NAME(__tsan_atomic8_fetch_add) \
  NAME(__tsan_atomic8_fetch_and) \
  NAME(__tsan_atomic8_fetch_nand) \
  NAME(__tsan_atomic8_fetch_or) \
  NAME(__tsan_atomic8_fetch_sub) \
  NAME(__tsan_atomic8_fetch_xor) \
  NAME(__tsan_atomic8_load) \
  NAME(__tsan_atomic8_store) \
  NAME(__tsan_atomic_signal_fence) \
  NAME(__tsan_atomic_thread_fence) \
  NAME(__tsan_func_entry) \
  NAME(__tsan_func_exit) \
  NAME(__tsan_init) \
  NAME(__tsan_read1) \
  NAME(__tsan_read16) \
  NAME(__tsan_read2) \
  NAME(__tsan_read4) \
  NAME(__tsan_read8) \
  NAME(__tsan_read_range) \
  NAME(__tsan_volatile_read1) \
  NAME(__tsan_volatile_read16) \
  NAME(__tsan_volatile_read2) \
  NAME(__tsan_volatile_read4) \
  NAME(__tsan_volatile_read8) \
  NAME(__tsan_volatile_write1) \
  NAME(__tsan_volatile_write16) \
  NAME(__tsan_volatile_write2) \
  NAME(__tsan_volatile_write4) \
  NAME(__tsan_volatile_write8) \
  NAME(__tsan_vptr_update) \
  NAME(__tsan_write1) \
  NAME(__tsan_write16) \
  NAME(__tsan_write2) \
  NAME(__tsan_write4) \
  NAME(__tsan_write8) \
  NAME(__tsan_write_range)

// Those of clang 14: lib/Transforms/Instrumentation/ThreadSanitizer.cpp of LLVM 14.0.6; the three block operations
// are of LLVM 15 and later.
#define HOOKS_OF_CLANG(NAME) \
  NAME(__tsan_atomic128_compare_exchange_val) \
  NAME(__tsan_atomic128_exchange) \
  NAME(__tsan_atomic128_fetch_add) \
  NAME(__tsan_atomic128_fetch_and) \
  NAME(__tsan_atomic128_fetch_nand) \
  NAME(__tsan_atomic128_fetch_or) \
  NAME(__tsan_atomic128_fetch_sub) \
  NAME(__tsan_atomic128_fetch_xor) \
  NAME(__tsan_atomic128_load) \
  NAME(__tsan_atomic128_store) \
  NAME(__tsan_atomic16_compare_exchange_val) \
  NAME(__tsan_atomic16_exchange) \
  NAME(__tsan_atomic16_fetch_add) \
  NAME(__tsan_atomic16_fetch_and) \
  NAME(__tsan_atomic16_fetch_nand) \
  NAME(__tsan_atomic16_fetch_or) \
  NAME(__tsan_atomic16_fetch_sub) \
  NAME(__tsan_atomic16_fetch_xor) \
  NAME(__tsan_atomic16_load) \
  NAME(__tsan_atomic16_store) \
  NAME(__tsan_atomic32_compare_exchange_val) \
  NAME(__tsan_atomic32_exchange) \
  NAME(__tsan_atomic32_fetch_add) \
  NAME(__tsan_atomic32_fetch_and) \
  NAME(__tsan_atomic32_fetch_nand) \
  NAME(__tsan_atomic32_fetch_or) \
  NAME(__tsan_atomic32_fetch_sub) \
  NAME(__tsan_atomic32_fetch_xor) \
  NAME(__tsan_atomic32_load) \
  NAME(__tsan_atomic32_store) \
  NAME(__tsan_atomic64_compare_exchange_val) \
  NAME(__tsan_atomic64_exchange) \
  NAME(__tsan_atomic64_fetch_add) \
  NAME(__tsan_atomic64_fetch_and) \
  NAME(__tsan_atomic64_fetch_nand) \
  NAME(__tsan_atomic64_fetch_or) \
  NAME(__tsan_atomic64_fetch_sub) \
  NAME(__tsan_atomic64_fetch_xor) \
  NAME(__tsan_atomic64_load) \
  NAME(__tsan_atomic64_store) \
  NAME(__tsan_atomic8_compare_exchange_val) \
  NAME(__tsan_atomic8_exchange) \
  NAME(__tsan_atomic8_fetch_add) \
  NAME(__tsan_atomic8_fetch_and) \
  NAME(__tsan_atomic8_fetch_nand) \
  NAME(__tsan_atomic8_fetch_or) \
  NAME(__tsan_atomic8_fetch_sub) \
  NAME(__tsan_atomic8_fetch_xor) \
  NAME(__tsan_atomic8_load) \
  NAME(__tsan_atomic8_store) \
  NAME(__tsan_atomic_signal_fence) \
  NAME(__tsan_atomic_thread_fence) \
  NAME(__tsan_func_entry) \
  NAME(__tsan_func_exit) \
  NAME(__tsan_ignore_thread_begin) \
  NAME(__tsan_ignore_thread_end) \
  NAME(__tsan_init) \
  NAME(__tsan_memcpy) \
  NAME(__tsan_memmove) \
  NAME(__tsan_memset) \
  NAME(__tsan_read1) \
  NAME(__tsan_read16) \
  NAME(__tsan_read2) \
  NAME(__tsan_read4) \
  NAME(__tsan_read8) \
  NAME(__tsan_read_write1) \
  NAME(__tsan_read_write16) \
  NAME(__tsan_read_write2) \
  NAME(__tsan_read_write4) \
  NAME(__tsan_read_write8) \
  NAME(__tsan_unaligned_read1) \
  NAME(__tsan_unaligned_read16) \
  NAME(__tsan_unaligned_read2) \
  NAME(__tsan_unaligned_read4) \
  NAME(__tsan_unaligned_read8) \
  NAME(__tsan_unaligned_read_write1) \
  NAME(__tsan_unaligned_read_write16) \
  NAME(__tsan_unaligned_read_write2) \
  NAME(__tsan_unaligned_read_write4) \
  NAME(__tsan_unaligned_read_write8) \
  NAME(__tsan_unaligned_volatile_read1) \
  NAME(__tsan_unaligned_volatile_read16) \
  NAME(__tsan_unaligned_volatile_read2) \
  NAME(__tsan_unaligned_volatile_read4) \
  NAME(__tsan_unaligned_volatile_read8) \
  NAME(__tsan_unaligned_volatile_write1) \
  NAME(__tsan_unaligned_volatile_write16) \
  NAME(__tsan_unaligned_volatile_write2) \
  NAME(__tsan_unaligned_volatile_write4) \
  NAME(__tsan_unaligned_volatile_write8) \
  NAME(__tsan_unaligned_write1) \
  NAME(__tsan_unaligned_write16) \
  NAME(__tsan_unaligned_write2) \
  NAME(__tsan_unaligned_write4) \
  NAME(__tsan_unaligned_write8) \
  NAME(__tsan_volatile_read1) \
  NAME(__tsan_volatile_read16) \
  NAME(__tsan_volatile_read2) \
  NAME(__tsan_volatile_read4) \
  NAME(__tsan_volatile_read8) \
  NAME(__tsan_volatile_write1) \
  NAME(__tsan_volatile_write16) \
  NAME(__tsan_volatile_write2) \
  NAME(__tsan_volatile_write4) \
  NAME(__tsan_volatile_write8) \
  NAME(__tsan_vptr_read) \
  NAME(__tsan_vptr_update) \
  NAME(__tsan_write1) \
  NAME(__tsan_write16) \
  NAME(__tsan_write2) \
  NAME(__tsan_write4) \
  NAME(__tsan_write8)

#define DECLARE(name) extern char name[];
#define ADDRESS(name) name,
HOOKS_OF_GCC(DECLARE)
HOOKS_OF_CLANG(DECLARE)

static char* const of_gcc[] = {HOOKS_OF_GCC(ADDRESS)};
static char* const of_clang[] = {HOOKS_OF_CLANG(ADDRESS)};
char* const* volatile all[] = {of_gcc, of_clang};

int main(void) { return sizeof of_gcc / sizeof of_gcc[0] == 83 ? 0 : 9; }
