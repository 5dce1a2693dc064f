# SPDX-License-Identifier: GPL-3.0-or-later
# The checks of core/proof: the containment check of polynomial models, compiled for several degrees
# and flags, and with error terms left out; and the reference in interval arithmetic (Debian:
# libflint-arb-dev), which nothing of Leeway links.

# pm_copy(NAME FLAGS...): one more copy of pm_contained.c in test_proof_numbers.
function(pm_copy name)
  add_library(pm_${name} OBJECT pm_contained.c)
  target_link_libraries(pm_${name} PRIVATE lwt)
  target_include_directories(pm_${name} PRIVATE ${CMAKE_SOURCE_DIR}/core)
  target_compile_definitions(pm_${name} PRIVATE LWT_PM_ENTRY=pm_${name})
  target_compile_options(pm_${name} PRIVATE ${ARGN})
  target_sources(t_core_proof_numbers PRIVATE $<TARGET_OBJECTS:pm_${name}>)
endfunction()

foreach(degree 2 3 4 5 6)
  pm_copy(degree_${degree} -DLWI_PM_DEGREE=${degree})
endforeach()
pm_copy(fused -O3 -march=native -ffp-contract=fast)
pm_copy(rounding_math -O2 -frounding-math)
pm_copy(unoptimised -O0)
pm_copy(mutants_2 -DLWI_PM_DEGREE=2 -DLWT_PM_MUTANTS)
pm_copy(mutants_4 -DLWI_PM_DEGREE=4 -DLWT_PM_MUTANTS)
# Two powers of the square in series of degree 5 at most: nothing is dropped that could hide the
# series' own rest.
pm_copy(mutants_6 -DLWI_PM_DEGREE=6 -DLWI_PM_SERIES=2 -DLWT_PM_MUTANTS)

find_library(LEEWAY_ARB NAMES flint-arb arb REQUIRED)
find_library(LEEWAY_FLINT NAMES flint REQUIRED)
target_link_libraries(t_core_proof_numbers PRIVATE quadmath ${LEEWAY_ARB} ${LEEWAY_FLINT})

# rank.c once more, with error terms that can be left out.
target_sources(t_core_proof_rank PRIVATE rank_mutants.c)
target_link_libraries(t_core_proof_rank PRIVATE quadmath)
target_link_libraries(t_core_proof_roots PRIVATE quadmath)
