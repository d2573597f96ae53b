"""Multifrontal Cholesky factorisation for plane meshes.

References
----------
Duff & Reid, "The multifrontal solution of indefinite sparse symmetric linear equations", ACM Trans.
Math. Softw. 9 (1983). Liu, "The multifrontal method for sparse matrix solution: theory and
practice", SIAM Review 34 (1992).
"""
