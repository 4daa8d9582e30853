"""Squared-hinge problems, one a tag, by liblinear (Fan et al., JMLR 2008) through its C interface.

Its dual coordinate descent (Hsieh et al., ICML 2008) minimises 1/2 |w|² + C Σ h max(0, 1 - ys)², where h is a
factor on the positives. The features are laid out once and shared by all problems: with twenty thousand tags,
copying them for each would cost more than solving. Structures: linear.h of liblinear 2.3.0 (Debian 12).
"""

import ctypes

import numpy as np

L2R_L2LOSS_SVC_DUAL = 1
VERSION = 230
NODE = np.dtype([("index", np.int32), ("value", np.float64)], align=True)


class Problem(ctypes.Structure):
    """struct problem"""
    _fields_ = [("l", ctypes.c_int), ("n", ctypes.c_int), ("y", ctypes.c_void_p), ("x", ctypes.c_void_p),
                ("bias", ctypes.c_double)]


class Parameter(ctypes.Structure):
    """struct parameter"""
    _fields_ = [("solver_type", ctypes.c_int), ("eps", ctypes.c_double), ("C", ctypes.c_double),
                ("nr_weight", ctypes.c_int), ("weight_label", ctypes.POINTER(ctypes.c_int)),
                ("weight", ctypes.POINTER(ctypes.c_double)), ("p", ctypes.c_double), ("init_sol", ctypes.c_void_p)]


class Model(ctypes.Structure):
    """struct model"""
    _fields_ = [("param", Parameter), ("nr_class", ctypes.c_int), ("nr_feature", ctypes.c_int),
                ("w", ctypes.POINTER(ctypes.c_double)), ("label", ctypes.POINTER(ctypes.c_int)),
                ("bias", ctypes.c_double)]


QUIET = ctypes.CFUNCTYPE(None, ctypes.c_char_p)(lambda text: None)


def load():
    """The library; OSError where it is missing or of a version whose structures may differ."""
    library = ctypes.CDLL("liblinear.so.4")
    if ctypes.c_int.in_dll(library, "liblinear_version").value != VERSION:
        raise OSError("liblinear is not version 2.3.0")
    library.train.restype = ctypes.POINTER(Model)
    library.train.argtypes = [ctypes.POINTER(Problem), ctypes.POINTER(Parameter)]
    library.free_and_destroy_model.argtypes = [ctypes.POINTER(ctypes.POINTER(Model))]
    library.free_and_destroy_model.restype = None
    library.set_print_string_function(QUIET)
    return library


def layout(x):
    """The rows of a sparse matrix as liblinear has them: nodes numbered from 1, -1 at each end; and their places."""
    nodes = np.zeros(x.nnz + x.shape[0], dtype=NODE)
    lengths = np.diff(x.indptr)
    starts = x.indptr[:-1] + np.arange(x.shape[0])
    places = np.arange(x.nnz) + np.repeat(np.arange(x.shape[0]), lengths)
    nodes["index"][places], nodes["value"][places] = x.indices + 1, x.data
    nodes["index"][starts + lengths] = -1
    return nodes, (nodes.ctypes.data + starts * NODE.itemsize).astype(np.uintp)


class Solver:
    """Solves one problem after another on the same features (items × terms, the bias among them)."""

    def __init__(self, x, cost, tolerance):
        x = x.tocsr()
        self.library = load()
        self.shape, self.cost, self.tolerance = x.shape, cost, tolerance
        self.nodes, self.rows = layout(x)

    def weights(self, positives, factor):
        """The weights for one tag: `positives` numbers its items, `factor` weighs them. Needs both kinds of items."""
        y = np.full(self.shape[0], -1.0)
        y[positives] = 1.0
        problem = Problem(self.shape[0], self.shape[1], y.ctypes.data, self.rows.ctypes.data, -1.0)
        labels, factors = (ctypes.c_int * 1)(1), (ctypes.c_double * 1)(factor)
        parameter = Parameter(L2R_L2LOSS_SVC_DUAL, self.tolerance, self.cost, 1, labels, factors, 0.1, None)
        model = self.library.train(ctypes.byref(problem), ctypes.byref(parameter))
        # Of the labels 1 and -1 liblinear takes 1 as the first, whichever comes first: weights point to the tag.
        weights = np.ctypeslib.as_array(model.contents.w, (self.shape[1],)).copy()
        # The parameter's arrays belong to Python: the copy of it in the model must not free them.
        model.contents.param.weight_label, model.contents.param.weight = None, None
        self.library.free_and_destroy_model(ctypes.byref(model))
        return weights
