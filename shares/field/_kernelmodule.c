/* The native kernel as a Python module: parse, check, call, return. The arithmetic is in _kernel.c.
 *
 * Everything is checked before anything is written: shapes, overlap, writability. Messages hold public facts only.
 * Secret bytes stay in the caller's buffers: nothing here copies or keeps them.
 */
#define PY_SSIZE_T_CLEAN
#include <pyconfig.h>
#if defined(Py_GIL_DISABLED)
#undef Py_LIMITED_API /* Free-threaded builds have no limited API. */
#endif
#include <Python.h>

#include "_kernel.h"

/* From this many products on, the work is long enough to let other threads run. */
#define RELEASE_FROM ((size_t)1 << 16)

/* Get the buffer of an object, or set TypeError (not a buffer) or ValueError (not usable) and return -1. */
static int take(PyObject *object, Py_buffer *view, int flags)
{
    if (PyObject_GetBuffer(object, view, flags) == 0) {
        return 0;
    }
    if (PyErr_ExceptionMatches(PyExc_BufferError)) {
        PyErr_SetString(PyExc_ValueError, flags == PyBUF_WRITABLE ? "an out must be writable and contiguous"
                                                                  : "a buffer must be contiguous");
    }
    return -1;
}

static int refuse(const char *message)
{
    PyErr_SetString(PyExc_ValueError, message);
    return -1;
}

static int check_modulus(int modulus)
{
    return modulus >= 0x100 && modulus <= 0x1ff ? 0 : refuse("the modulus must be of degree 8");
}

static int overlap(const Py_buffer *a, const Py_buffer *b)
{
    uintptr_t a_start = (uintptr_t)a->buf, b_start = (uintptr_t)b->buf;
    return a_start < b_start + (size_t)b->len && b_start < a_start + (size_t)a->len;
}

/* Let other threads run while much is to do. Returns what `resume` wants. */
static PyThreadState *pause_for(size_t products)
{
    return products >= RELEASE_FROM ? PyEval_SaveThread() : NULL;
}

static void resume(PyThreadState *state)
{
    if (state != NULL) {
        PyEval_RestoreThread(state);
    }
}

static enum shares_path default_path(void)
{
    enum shares_path path = 0;
    while (!shares_path_runs(path)) {
        path++;
    }
    return path;
}

/* Find a path by its name, or set ValueError and return -1. */
static int find_path(const char *name, enum shares_path *path)
{
    for (*path = 0; *path < SHARES_PATHS; (*path)++) {
        const char *a = shares_path_name(*path), *b = name;
        while (*a != '\0' && *a == *b) {
            a++;
            b++;
        }
        if (*a == *b) {
            return shares_path_runs(*path) ? 0 : refuse("this processor or build does not have that path");
        }
    }
    return refuse("unknown path");
}

/* What one call of combine holds: released whole, however far it came. */
struct combination {
    PyObject *matrix, *rows, *out; /* tuples of our own, that no other thread can change */
    size_t row_count, out_count, length, view_count;
    Py_buffer *views; /* the rows, then the outs */
    const uint8_t **in_bytes;
    uint8_t **out_bytes;
    uint8_t *factors;
};

static void release(struct combination *c)
{
    while (c->view_count > 0) {
        PyBuffer_Release(&c->views[--c->view_count]);
    }
    PyMem_Free(c->views);
    PyMem_Free((void *)c->in_bytes);
    PyMem_Free((void *)c->out_bytes);
    PyMem_Free(c->factors);
    Py_XDECREF(c->matrix);
    Py_XDECREF(c->rows);
    Py_XDECREF(c->out);
}

static int allocate(struct combination *c)
{
    if (c->row_count > PY_SSIZE_T_MAX / c->out_count) {
        PyErr_NoMemory();
        return -1;
    }
    c->views = PyMem_Calloc(c->row_count + c->out_count, sizeof *c->views);
    c->in_bytes = PyMem_Calloc(c->row_count, sizeof *c->in_bytes);
    c->out_bytes = PyMem_Calloc(c->out_count, sizeof *c->out_bytes);
    c->factors = PyMem_Calloc(c->row_count, c->out_count);
    if (c->views == NULL || c->in_bytes == NULL || c->out_bytes == NULL || c->factors == NULL) {
        PyErr_NoMemory();
        return -1;
    }
    return 0;
}

/* Copy the public matrix, so that its lines lie one after the other and no out can overlap them. */
static int copy_matrix(struct combination *c)
{
    if ((size_t)PyTuple_Size(c->matrix) != c->out_count) {
        return refuse("the matrix must have one line for each out");
    }
    for (size_t i = 0; i < c->out_count; i++) {
        Py_buffer line;
        if (take(PyTuple_GetItem(c->matrix, (Py_ssize_t)i), &line, PyBUF_SIMPLE) < 0) {
            return -1;
        }
        int fits = (size_t)line.len == c->row_count;
        for (size_t j = 0; fits && j < c->row_count; j++) {
            c->factors[i * c->row_count + j] = ((const uint8_t *)line.buf)[j];
        }
        PyBuffer_Release(&line);
        if (!fits) {
            return refuse("the matrix must have one column for each row");
        }
    }
    return 0;
}

static int take_views(struct combination *c)
{
    while (c->view_count < c->row_count + c->out_count) {
        size_t n = c->view_count;
        int is_row = n < c->row_count;
        PyObject *object = is_row ? PyTuple_GetItem(c->rows, (Py_ssize_t)n)
                                  : PyTuple_GetItem(c->out, (Py_ssize_t)(n - c->row_count));
        if (take(object, &c->views[n], is_row ? PyBUF_SIMPLE : PyBUF_WRITABLE) < 0) {
            return -1;
        }
        c->view_count++;
        if (c->views[n].len == 0 || c->views[n].len != c->views[0].len) {
            return refuse("rows and outs must all have the same length, 1 byte or more");
        }
        if (is_row) {
            c->in_bytes[n] = c->views[n].buf;
            continue;
        }
        c->out_bytes[n - c->row_count] = c->views[n].buf;
        for (size_t other = 0; other < n; other++) {
            if (overlap(&c->views[other], &c->views[n])) {
                return refuse("an out overlaps a row or another out");
            }
        }
    }
    c->length = (size_t)c->views[0].len;
    return 0;
}

PyDoc_STRVAR(combine_doc,
             "combine($module, modulus, matrix, rows, out, /, *, path=None)\n--\n\n"
             "Write out[i][t] = sum over j of matrix[i][j] * rows[j][t] over GF(2)[x]/(modulus).\n\n"
             "ValueError: shapes do not fit, an out is read-only or overlaps a row or another out, or the path does not\n"
             "run here; nothing has been written then. The path, one of paths(), is chosen for tests only.");

static PyObject *combine(PyObject *module, PyObject *args, PyObject *kwargs)
{
    static char *names[] = {"", "", "", "", "path", NULL};
    struct combination c = {0};
    PyObject *matrix, *rows, *out, *result = NULL;
    const char *path_name = NULL;
    int modulus;
    enum shares_path path = default_path();
    (void)module;
    if (!PyArg_ParseTupleAndKeywords(args, kwargs, "iOOO|$z:combine", names, &modulus, &matrix, &rows, &out,
                                     &path_name)) {
        return NULL;
    }
    if (check_modulus(modulus) < 0 || (path_name != NULL && find_path(path_name, &path) < 0)) {
        return NULL;
    }
    c.matrix = PySequence_Tuple(matrix);
    c.rows = c.matrix == NULL ? NULL : PySequence_Tuple(rows);
    c.out = c.rows == NULL ? NULL : PySequence_Tuple(out);
    if (c.out == NULL) {
        goto done;
    }
    c.row_count = (size_t)PyTuple_Size(c.rows);
    c.out_count = (size_t)PyTuple_Size(c.out);
    if (c.row_count == 0 || c.out_count == 0) {
        refuse("at least one row and one out are needed");
        goto done;
    }
    if (allocate(&c) < 0 || copy_matrix(&c) < 0 || take_views(&c) < 0) {
        goto done;
    }
    PyThreadState *state = pause_for(c.row_count * c.out_count * c.length);
    shares_combine(path, (unsigned)modulus, c.out_bytes, c.out_count, c.in_bytes, c.row_count, c.factors, c.length);
    resume(state);
    result = Py_NewRef(Py_None);
done:
    release(&c);
    return result;
}

static int check_projection(const Py_buffer *matrix, const Py_buffer *row, const Py_buffer *out)
{
    if (row->len == 0 || out->len == 0 || matrix->len / row->len != out->len || matrix->len % row->len != 0) {
        return refuse("the matrix must have one line for each byte of out and one column for each byte of the row");
    }
    if (overlap(out, row) || overlap(out, matrix)) {
        return refuse("out overlaps the row or the matrix");
    }
    return 0;
}

PyDoc_STRVAR(project_doc,
             "project($module, modulus, matrix, row, out, /)\n--\n\n"
             "Write out[i] = sum over j of matrix[i][j] * row[j] over GF(2)[x]/(modulus).\n\n"
             "ValueError: shapes do not fit, out is read-only or overlaps the row or the matrix; nothing has been\n"
             "written then.");

static PyObject *project(PyObject *module, PyObject *args)
{
    PyObject *objects[3], *result = NULL;
    Py_buffer views[3];
    int modulus, taken = 0;
    (void)module;
    if (!PyArg_ParseTuple(args, "iOOO:project", &modulus, &objects[0], &objects[1], &objects[2])) {
        return NULL;
    }
    while (taken < 3 && take(objects[taken], &views[taken], taken == 2 ? PyBUF_WRITABLE : PyBUF_SIMPLE) == 0) {
        taken++;
    }
    if (taken == 3 && check_modulus(modulus) == 0 && check_projection(&views[0], &views[1], &views[2]) == 0) {
        PyThreadState *state = pause_for((size_t)views[0].len);
        shares_project((unsigned)modulus, views[2].buf, (size_t)views[2].len, views[0].buf, views[1].buf,
                       (size_t)views[1].len);
        resume(state);
        result = Py_NewRef(Py_None);
    }
    while (taken > 0) {
        PyBuffer_Release(&views[--taken]);
    }
    return result;
}

PyDoc_STRVAR(paths_doc, "paths($module, /)\n--\n\nName the paths of combine that run here, fastest first.");

static PyObject *paths(PyObject *module, PyObject *unused)
{
    (void)module;
    (void)unused;
    PyObject *names = PyList_New(0), *result = NULL;
    for (enum shares_path path = 0; names != NULL && path < SHARES_PATHS; path++) {
        if (shares_path_runs(path)) {
            PyObject *name = PyUnicode_FromString(shares_path_name(path));
            if (name == NULL || PyList_Append(names, name) < 0) {
                Py_CLEAR(names);
            }
            Py_XDECREF(name);
        }
    }
    if (names != NULL) {
        result = PyList_AsTuple(names);
        Py_DECREF(names);
    }
    return result;
}

PyDoc_STRVAR(default_path_doc, "default_path($module, /)\n--\n\nName the path that combine takes here.");

static PyObject *name_default_path(PyObject *module, PyObject *unused)
{
    (void)module;
    (void)unused;
    return PyUnicode_FromString(shares_path_name(default_path()));
}

static PyMethodDef methods[] = {
    {"combine", (PyCFunction)(void (*)(void))combine, METH_VARARGS | METH_KEYWORDS, combine_doc},
    {"project", project, METH_VARARGS, project_doc},
    {"paths", paths, METH_NOARGS, paths_doc},
    {"default_path", name_default_path, METH_NOARGS, default_path_doc},
    {NULL, NULL, 0, NULL},
};

static PyModuleDef_Slot slots[] = {
#if defined(Py_mod_gil)
    {Py_mod_gil, Py_MOD_GIL_NOT_USED},
#endif
    {0, NULL},
};

static struct PyModuleDef definition = {
    PyModuleDef_HEAD_INIT,
    .m_name = "shares.field._kernel",
    .m_doc = "The native kernel: a public matrix times rows of secret bytes over GF(2^8), in constant time.",
    .m_methods = methods,
    .m_slots = slots,
};

PyMODINIT_FUNC PyInit__kernel(void)
{
    return PyModuleDef_Init(&definition);
}
