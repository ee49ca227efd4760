# earshot_recordable(TARGET): `earshot record` can record the program TARGET. Its own sources are compiled with hooks,
# and it is linked with the recorder instead of the sanitizer's library. Apply it to the static libraries it is made
# of, too, as far as their accesses are to be recorded.

# The flags, as lists, in the scope of the caller: recordable_compile_flags, recordable_clang_flags (needed by clang in
# addition) and recordable_link_flags.
macro(earshot_recordable_flags)
  # -fno-builtin-*: the compilers would replace calls with constant sizes by instructions that have no hooks.
  set(recordable_compile_flags
      -fsanitize=thread -fno-builtin-memcpy -fno-builtin-memmove -fno-builtin-memset)
  # clang leaves out the hook of a read that a write to the same place follows, unless told not to.
  set(recordable_clang_flags -mllvm -tsan-instrument-read-before-write=1)
  # --wrap: the calls that remain lead to the recorder, but only those of the program's own objects.
  set(recordable_link_flags
      -Wl,--wrap=memcpy -Wl,--wrap=memmove -Wl,--wrap=memset
      -Wl,--wrap=__memcpy_chk -Wl,--wrap=__memmove_chk -Wl,--wrap=__memset_chk)
endmacro()

function(earshot_recordable target)
  earshot_recordable_flags()
  string(JOIN " " clang_flags ${recordable_clang_flags})
  target_compile_options(${target} PRIVATE ${recordable_compile_flags}
                         $<$<OR:$<C_COMPILER_ID:Clang>,$<CXX_COMPILER_ID:Clang>>:SHELL:${clang_flags}>)
  get_target_property(type ${target} TYPE)
  if(type STREQUAL "EXECUTABLE")
    target_link_options(${target} PRIVATE ${recordable_link_flags})
    target_link_libraries(${target} PRIVATE earshot::recorder)
  endif()
endfunction()
