from t8 import *
