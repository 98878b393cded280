"""Wild and half-wild calls of everything public: a result or a telling refusal, nothing else."""
