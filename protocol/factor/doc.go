// Package factor treats a factor as a partition of rows into classes and gives the
// algebra on which designs are built: finer and coarser, infimum and supremum,
// orthogonality, projection, degrees of freedom by Möbius inversion (Tjur 1984;
// Bailey 2008, ch. 10). It knows no names and no data files.
package factor
