"""One module a question: the estimator first, below it the public function."""




